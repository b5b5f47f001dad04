package wire

import (
	"os"
	"strings"
	"testing"
)

func TestTheGeneratedTypesAreFresh(t *testing.T) {
	const path = "../../site/wire.gen.ts"
	written, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	if string(written) != TypeScript(Exchanges) {
		t.Errorf("%s does not match the message types; go run ./build site renews it", path)
	}
}

func TestEveryGoShapeHasItsTypeScriptShape(t *testing.T) {
	type Inner struct {
		Label string `json:"label"`
	}
	type Outer struct {
		Flag   bool               `json:"flag"`
		Count  int64              `json:"count"`
		Triple [3]float64         `json:"triple"`
		Pairs  [][2]int           `json:"pairs"`
		Inner  *Inner             `json:"inner"`
		Maybe  *Inner             `json:"maybe,omitempty"`
		Many   []*Inner           `json:"many"`
		ByName map[string]float64 `json:"byName"`
		Hidden string             `json:"-"`
		secret int
	}
	text := TypeScript([]Exchange{{"try", Outer{secret: 1}, Inner{}}})
	for _, wanted := range []string{
		"export interface Outer {\n  flag: boolean;\n  count: number;\n  triple: [number, number, number];\n" +
			"  pairs: [number, number][];\n  inner: Inner | null;\n  maybe?: Inner;\n  many: (Inner | null)[];\n" +
			"  byName: Record<string, number>;\n}\n",
		"export interface Inner {\n  label: string;\n}\n",
		"export interface Requests {\n  try: { body: Outer; reply: Inner };\n}\n",
	} {
		if !strings.Contains(text, wanted) {
			t.Errorf("wanted in the generated text:\n%s\nfound:\n%s", wanted, text)
		}
	}
}

func TestTypesThatCannotTravelAreRefused(t *testing.T) {
	type Fault struct { // shares its name with recon/fault's, which Failure brings along
		Other int `json:"other"`
	}
	type Nameless struct{ Count int }
	for name, body := range map[string]any{
		"a channel":                struct{ C chan int }{},
		"a field without a name":   Nameless{},
		"two structs of one name":  Fault{},
		"a complex number in JSON": []complex128{},
	} {
		t.Run(name, func(t *testing.T) {
			defer func() {
				if recover() == nil {
					t.Error("the types were generated, wanted a panic")
				}
			}()
			TypeScript([]Exchange{{"try", body, Progress{}}})
		})
	}
}
