//go:build js && wasm

// Command wasm is the engine as a worker of the page runs it. It only carries bytes between JavaScript and wire.Engine
// and is the one file that knows syscall/js.
//
// The worker defines globalThis.torrloomReady before it starts the program. It is called once, with the function that
// answers requests and with the hello message as JSON. That function takes (kind, body, buffers, progress): two
// strings, an array of Uint8Array and a function of one string. It returns {body, buffers} or {fault}, and undefined
// when the program has died on the way, because a fatal error of Go does not throw.
package main

import (
	"encoding/json"
	"runtime/debug"
	"syscall/js"
	"time"

	"torrloom/recon/fault"
	"torrloom/wasm/wire"
)

// build names the sources that this engine was made from. The linker sets it.
var build = "unnamed"

const (
	// progressInterval keeps progress at ten messages a second.
	progressInterval = 100 * time.Millisecond
	// maxStackBytes lets runaway recursion die in an instant; Go's own limit of 1 GB would first eat the memory.
	maxStackBytes = 64 << 20
)

func main() {
	debug.SetMaxStack(maxStackBytes)
	engine := wire.NewEngine(build)
	hello, err := wire.Encode(engine.Hello())
	if err != nil {
		panic(err)
	}
	answer := js.FuncOf(func(_ js.Value, args []js.Value) any {
		return answerOne(engine, args[0].String(), args[1].String(), args[2], args[3])
	})
	js.Global().Call("torrloomReady", answer, string(hello))
	select {}
}

func answerOne(engine *wire.Engine, kind, body string, buffers, progress js.Value) any {
	crashOnPurpose(kind, body)
	reply, out, err := engine.Handle(kind, []byte(body), bytesOf(buffers), atMostTenPerSecond(progress))
	if err != nil {
		return failure(err)
	}
	text, err := wire.Encode(reply)
	if err != nil {
		return failure(fault.New(fault.Bug, kind, "the answer cannot be written as JSON: %v", err))
	}
	return map[string]any{"body": string(text), "buffers": arraysOf(out)}
}

func failure(err error) any {
	text, encodeErr := json.Marshal(wire.Failure{Fault: *fault.From(err)})
	if encodeErr != nil {
		panic(encodeErr)
	}
	return map[string]any{"fault": string(text)}
}

func bytesOf(buffers js.Value) [][]byte {
	all := make([][]byte, buffers.Length())
	for i := range all {
		all[i] = make([]byte, buffers.Index(i).Length())
		js.CopyBytesToGo(all[i], buffers.Index(i))
	}
	return all
}

func arraysOf(buffers [][]byte) []any {
	all := make([]any, len(buffers))
	for i, b := range buffers {
		array := js.Global().Get("Uint8Array").New(len(b))
		js.CopyBytesToJS(array, b)
		all[i] = array
	}
	return all
}

// atMostTenPerSecond returns a progress function that posts the first message and drops those that follow too soon.
func atMostTenPerSecond(progress js.Value) func(wire.Progress) {
	var last time.Time
	return func(p wire.Progress) {
		if now := time.Now(); now.Sub(last) >= progressInterval {
			last = now
			text, err := json.Marshal(p)
			if err != nil {
				panic(err)
			}
			progress.Invoke(string(text))
		}
	}
}
