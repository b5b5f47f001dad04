package wire

import (
	"math"
	"testing"
)

func TestNilSlicesTravelAsEmptyArrays(t *testing.T) {
	type row struct {
		Counts []int `json:"counts"`
	}
	type reply struct {
		Names  []string `json:"names"`
		Rows   []row    `json:"rows"`
		Best   *row     `json:"best"`
		None   *row     `json:"none"`
		Fixed  [2]row   `json:"fixed"`
		secret []int
	}
	sent := reply{Rows: []row{{}, {Counts: []int{7}}}, Best: &row{}, secret: nil}
	const wanted = `{"names":[],"rows":[{"counts":[]},{"counts":[7]}],"best":{"counts":[]},"none":null,` +
		`"fixed":[{"counts":[]},{"counts":[]}]}`
	for name, message := range map[string]any{"by value": sent, "by pointer": &sent} {
		text, err := Encode(message)
		if err != nil || string(text) != wanted {
			t.Errorf("%s: %s, %v; wanted %s", name, text, err, wanted)
		}
	}
	if sent.Names != nil || sent.Rows[0].Counts != nil || sent.Best.Counts != nil {
		t.Error("Encode has written to the message that it was given")
	}
}

func TestWhatJSONCannotSayIsAnError(t *testing.T) {
	if text, err := Encode(Progress{Fraction: math.NaN()}); err == nil {
		t.Errorf("NaN was written as %s, wanted an error", text)
	}
	if text, err := Encode(nil); err != nil || string(text) != "null" {
		t.Errorf("no message is written as %s, %v; wanted null", text, err)
	}
}
