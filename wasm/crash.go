//go:build js && wasm

//lint:file-ignore SA4010,SA4017,SA5007,U1000 what is wrong with this file is its purpose

package main

// crashKind is a request that no page makes: the tests ask for it through the console, to see that the page survives
// every way in which an engine can die or go astray. It is not in wire.Exchanges, so TypeScript refuses it.
const crashKind = "crash-on-purpose"

// crashOnPurpose dies in the way that body names, if kind asks for it. Only "grow" lives on, with 1.25 GiB in use.
func crashOnPurpose(kind, body string) {
	if kind != crashKind {
		return
	}
	switch body {
	case `"goroutine"`:
		done := make(chan int)
		go func() { panic("crash on purpose, in a goroutine") }()
		<-done
	case `"stack"`:
		deeper(1)
	case `"memory"`:
		hoard()
	case `"blocked"`:
		<-make(chan int)
	case `"grow"`:
		grown = make([]byte, 5<<28)
		return
	case `"loop"`:
		for {
			spins++
		}
	}
	panic("crash on purpose")
}

var (
	spins int
	grown []byte
)

func deeper(n int) int {
	return deeper(n+1) + n
}

// hoard takes memory until there is no more: wasm memory ends at 4 GiB.
func hoard() {
	var all [][]byte
	for {
		all = append(all, make([]byte, 1<<30))
	}
}
