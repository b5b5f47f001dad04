// Package quality judges an acquisition before anybody believes its image. Every check yields findings: how bad, the
// number, the rule and its source, what to do, and the shots or delays concerned. From them follow proposed settings for
// the conditioning. Nothing is deleted and nothing is changed here.
//
// All checks keep one promise: on clean data a check yields findings of level fine that carry its number, and raises a
// false alarm in at most one of a hundred acquisitions. What the settings already correct or leave out is judged as it
// is after that, so that a finding that was dealt with goes away.
//
// A check is one function and one row in Checks; a fault that it must find goes into the tests beside it.
package quality
