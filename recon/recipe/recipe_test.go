package recipe

import (
	"encoding/json"
	"reflect"
	"strings"
	"sync"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
	"torrloom/recon/phantom"
)

var demo = sync.OnceValues(func() (*acquisition.Acquisition, error) { return phantom.DemoAcquisition(false) })

func demoDefaults(t *testing.T) Recipe {
	t.Helper()
	a, err := demo()
	if err != nil {
		t.Fatal(err)
	}
	return Defaults(a, 26)
}

func TestDefaultsPassTheirOwnCheckAndCoverTheObject(t *testing.T) {
	r := demoDefaults(t)
	if err := r.Check(); err != nil {
		t.Fatal(err)
	}
	if r.Reconstruction.FieldOfViewMM < 26 || r.Calibration == nil || r.Calibration.Rate != "R1" {
		t.Errorf("defaults %+v", r)
	}
}

func TestEveryLeafOfTheRecipeHasOneCatalogueRow(t *testing.T) {
	rows := map[string]int{}
	for _, s := range Catalogue() {
		rows[s.Path]++
		if _, there := demoDefaults(t).Value(s.Path); !there {
			t.Errorf("row %s has no field", s.Path)
		}
		if s.Label == "" || s.Help == "" || s.Group == "" || s.Stage == "" || s.Kind == "choice" && len(s.Choices) == 0 {
			t.Errorf("row %s is incomplete", s.Path)
		}
	}
	var walk func(rt reflect.Type, path string)
	walk = func(rt reflect.Type, path string) {
		if rt.Kind() == reflect.Pointer {
			rt = rt.Elem()
		}
		if rt.Kind() != reflect.Struct {
			if path != "recipe" && rows[path] != 1 {
				t.Errorf("leaf %s has %d rows", path, rows[path])
			}
			return
		}
		for i, name := range namesOf(rt) {
			walk(rt.Field(i).Type, strings.TrimPrefix(path+"."+name, "."))
		}
	}
	walk(reflect.TypeFor[Recipe](), "")
}

func TestRecipeTextLiesOverTheDefaults(t *testing.T) {
	base := demoDefaults(t)
	got, err := Parse([]byte(`{"recipe":1,"reconstruction":{"matrix":40,"window":"none"},"calibration":{"zeroPerUS":0.2}}`), base)
	if err != nil {
		t.Fatal(err)
	}
	if got.Reconstruction.Matrix != 40 || got.Reconstruction.Window != "none" || got.Calibration.ZeroPerUS != 0.2 {
		t.Errorf("given settings are lost: %+v", got)
	}
	if got.Reconstruction.FieldOfViewMM != base.Reconstruction.FieldOfViewMM || got.Calibration.SlopePerUSPerTorr != base.Calibration.SlopePerUSPerTorr {
		t.Errorf("other settings changed: %+v", got)
	}
	if base.Calibration.ZeroPerUS == 0.2 {
		t.Error("parsing changed the recipe it started from")
	}
	if none, err := Parse([]byte(`{"calibration":null}`), base); err != nil || none.Calibration != nil {
		t.Errorf("a calibration of null stays: %v %v", none.Calibration, err)
	}
}

func TestWrittenRecipeReadsBackTheSame(t *testing.T) {
	base := demoDefaults(t)
	text, err := json.Marshal(base)
	if err != nil {
		t.Fatal(err)
	}
	other := base
	other.Reconstruction.Matrix, other.Calibration = 8, nil
	got, err := Parse(text, other)
	if err != nil || !reflect.DeepEqual(got, base) {
		t.Errorf("%v: %+v, want %+v", err, got, base)
	}
}

func TestFaultyRecipesNameTheKey(t *testing.T) {
	for text, want := range map[string]string{
		`{"reconstruction":{"matix":64}}`:                          `recipe reconstruction.matix: key "matix" is not known`,
		`{"Mask":{}}`:                                              `recipe Mask: key "Mask" is not known`,
		`{"reconstruction":{"window":"han"}}`:                      `recipe reconstruction.window: window "han" is not known; use none, sinc`,
		`{"reconstruction":{"matrix":"big"}}`:                      `recipe reconstruction.matrix: a JSON string was found; a whole number`,
		`{"reconstruction":{"matrix":7}}`:                          `recipe reconstruction.matrix: 7 voxels; use 8 to 512`,
		`{"reconstruction":{"matrix":64.5}}`:                       `recipe reconstruction.matrix`,
		`{"reconstruction":{"cutoff":1.2}}`:                        `recipe reconstruction.cutoff: 1.2`,
		`{"reconstruction":{"method":"magic"}}`:                    `recipe reconstruction.method: method "magic"`,
		`{"calibration":{"slopePerUSPerTorr":0}}`:                  `recipe calibration.slopePerUSPerTorr: 0 /µs/torr; a positive slope`,
		`{"calibration":{"rate":"R3"}}`:                            `recipe calibration.rate: rate "R3" is not known; use R1, R2 or R2*`,
		`{"rates":{"minPerUS":2,"maxPerUS":1}}`:                    `recipe rates.maxPerUS: 1 is not above`,
		`{"recipe":2}`:                                             `recipe recipe: format 2`,
		"{\"recipe\":1,\n\"mask\":{\"amplitudeFraction\":0.2,}\n}": `recipe: line 2 is not JSON`,
		`{"recipe":1`:                                              `recipe: the text ends too early`,
		`{} {}`:                                                    `recipe: text goes on`,
		`[]`:                                                       `recipe`,
	} {
		_, err := Parse([]byte(text), demoDefaults(t))
		if err == nil || fault.From(err).Kind != fault.BadSetting || !strings.HasPrefix(err.Error(), want) {
			t.Errorf("%s gives %v, want %s...", text, err, want)
		}
	}
}

func FuzzParse(f *testing.F) {
	f.Add([]byte(`{"recipe":1,"reconstruction":{"method":"back-projection","matrix":64,"fieldOfViewMM":34,"window":"hann","cutoff":0.9}}`))
	f.Add([]byte(`{"calibration":null,"mask":{"amplitudeFraction":1e400}}`))
	f.Fuzz(func(t *testing.T, text []byte) {
		if r, err := Parse(text, demoDefaults(t)); err == nil && r.Check() != nil {
			t.Errorf("a parsed recipe fails its check: %+v", r)
		}
	})
}
