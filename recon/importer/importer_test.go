package importer

import (
	"encoding/binary"
	"errors"
	"os"
	"path/filepath"
	"reflect"
	"runtime"
	"strings"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

const testdata = "../../testdata"

// files returns the paths of one family of testdata, at least one.
func files(t testing.TB, pattern string) []string {
	t.Helper()
	paths, err := filepath.Glob(filepath.Join(testdata, pattern))
	if err != nil || len(paths) == 0 {
		t.Fatalf("no %s in testdata (%v); run testdata/make_numpy.py", pattern, err)
	}
	return paths
}

func load(t testing.TB, path string) []byte {
	t.Helper()
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return data
}

func wantFault(t *testing.T, err error, kind fault.Kind) *fault.Fault {
	t.Helper()
	var f *fault.Fault
	if !errors.As(err, &f) || f.Kind != kind {
		t.Fatalf("got %v, want a %s fault", err, kind)
	}
	return f
}

// exact returns the acquisition that every file of testdata/numpy holds, from the formulas in make_numpy.py.
func exact() *acquisition.Acquisition {
	a := &acquisition.Acquisition{
		Delays: 2, Shots: 5, Samples: 16, Dim: 3, DelayUS: []float64{0.5, 1}, DwellNS: 4, TimeZeroSample: -1.25,
		Sequence: acquisition.InversionRecovery, Encoding: acquisition.Spoke, Domain: acquisition.Time, ShotRole: make([]int, 5),
	}
	celsius := 37.0
	a.Optional = acquisition.Optional{TemperatureC: &celsius, Note: "20 µl, pH 7.4"}
	for s := range 5 {
		a.GradientMTPerM = append(a.GradientMTPerM, [3]float64{float64(s + 1), float64(2 - s), float64(s%3 - 1)})
	}
	for d := range 2 {
		for s := range 5 {
			for j := range 16 {
				a.Signal = append(a.Signal, complex(float32((s+1)*(16*d+j)), float32(s-3*j+d)))
			}
		}
	}
	return a
}

func TestEveryWayToWriteTheSameAcquisitionOpensEqual(t *testing.T) {
	for _, path := range files(t, "numpy/*.npz") {
		name := filepath.Base(path)
		got, warnings, err := Open(name, load(t, path))
		if err != nil || len(warnings) != 0 {
			t.Errorf("%s: %v, warnings %q", name, err, warnings)
			continue
		}
		want := exact()
		want.Name = strings.TrimSuffix(name, ".npz")
		if !reflect.DeepEqual(got, want) {
			t.Errorf("%s:\ngot  %+v\nwant %+v", name, got, want)
		}
	}
}

// The first line of NAME.why.txt is the kind of the fault, the second words that its text must hold.
func TestEveryMalformedFileIsTheStatedFault(t *testing.T) {
	for _, why := range files(t, "malformed/*.why.txt") {
		path := strings.TrimSuffix(why, ".why.txt")
		lines := strings.SplitN(string(load(t, why)), "\n", 3)
		name := filepath.Base(path)
		a, _, err := Open(name, load(t, path))
		var f *fault.Fault
		if !errors.As(err, &f) || a != nil {
			t.Errorf("%s: got %v, want a fault", name, err)
			continue
		}
		if string(f.Kind) != lines[0] || !strings.Contains(f.Error(), lines[1]) || !strings.HasPrefix(f.Where, name) {
			t.Errorf("%s: %s fault %q; want %s with %q", name, f.Kind, f.Error(), lines[0], lines[1])
		}
	}
}

func TestEveryMalformedFileSaysWhy(t *testing.T) {
	for _, path := range files(t, "malformed/*") {
		if strings.HasSuffix(path, ".why.txt") {
			path = strings.TrimSuffix(path, ".why.txt")
			load(t, path)
		} else {
			load(t, path+".why.txt")
		}
	}
}

// A malformed file may cost what its bytes justify and no more: 64 bytes of memory per byte of file (the inflater's
// tables and the widest conversion) beside 4 MiB for the fixed parts. What a gzip file may unpack to in any case comes to
// that, five times while the memory for it grows by doubling.
func TestMalformedFilesAllocateLittle(t *testing.T) {
	for _, path := range files(t, "malformed/*") {
		if strings.HasSuffix(path, ".why.txt") {
			continue
		}
		data := load(t, path)
		allowed := 4<<20 + 64*uint64(len(data))
		if strings.HasSuffix(path, ".gz") {
			allowed += 5 * uint64(Default.HarmlessBytes)
		}
		var before, after runtime.MemStats
		runtime.ReadMemStats(&before)
		_, _, _ = Open(path, data)
		_, _ = Salvage(Default, path, data)
		runtime.ReadMemStats(&after)
		if spent := after.TotalAlloc - before.TotalAlloc; spent > allowed {
			t.Errorf("%s: %d bytes allocated for %d", path, spent, len(data))
		}
	}
}

// A table of text is whole after any line, so that it is not among these.
func TestEveryTruncationOfAFileOfTheFormatsIsAFault(t *testing.T) {
	for _, path := range files(t, "formats/*") {
		switch filepath.Ext(path) {
		case ".csv", ".tsv", ".txt":
			continue
		}
		data := load(t, path)
		whole := map[int]bool{len(data) - 1: strings.HasSuffix(path, ".dx")} // its last line end may be missing
		if strings.HasSuffix(path, ".mat") {                                 // whole after any variable
			whole = ends(t, data)
		}
		for n := range data {
			arrays, err := Read(path, data[:n])
			var f *fault.Fault
			if whole[n] && err == nil {
				continue
			}
			if !errors.As(err, &f) || f.Kind != fault.BadFile && f.Kind != fault.Unsupported || arrays != nil {
				t.Fatalf("%s cut to %d bytes: %v", path, n, err)
			}
		}
	}
}

// ends returns where the variables of a MAT-file end.
func ends(t *testing.T, data []byte) map[int]bool {
	out := map[int]bool{}
	m := &matFile{order: binary.LittleEndian}
	if data[0] != 'M' { // level 4
		for at := 0; at < len(data); {
			h, err := parseMAT4(data, at)
			if err != nil {
				t.Fatal(err)
			}
			_, at, err = h.read(data, Default)
			if err != nil {
				t.Fatal(err)
			}
			out[at] = true
		}
		return out
	}
	if string(data[126:128]) == "MI" {
		m.order = binary.BigEndian
	}
	out[matHeaderBytes] = true
	for at := matHeaderBytes; at < len(data); {
		_, next, err := m.element(data, at, place{}, false)
		if err != nil {
			t.Fatal(err)
		}
		out[next], at = true, next
	}
	return out
}

func TestEveryTruncationOfANumPyFileIsAFault(t *testing.T) {
	for _, path := range []string{"malformed/version-9.npy", "numpy/stored.npz", "numpy/deflated.npz"} {
		data := load(t, filepath.Join(testdata, path))
		if strings.HasSuffix(path, ".npy") {
			data = append([]byte{}, data...)
			data[6] = 1 // with its version put right the file is whole
		}
		if _, err := Read(path, data); err != nil {
			t.Fatalf("%s: %v", path, err)
		}
		for n := range data {
			arrays, err := Read(path, data[:n])
			var f *fault.Fault
			if !errors.As(err, &f) || f.Kind != fault.BadFile && f.Kind != fault.Unsupported || arrays != nil {
				t.Fatalf("%s cut to %d bytes: %v", path, n, err)
			}
		}
	}
}

func TestContentDecidesNotTheExtension(t *testing.T) {
	data := load(t, filepath.Join(testdata, "numpy/stored.npz"))
	if _, _, err := Open("traces.csv", data); err != nil {
		t.Error(err)
	}
}

func TestEveryFormatHasANameAndAnExtension(t *testing.T) {
	for _, f := range Formats {
		if f.Name == "" || len(f.Extensions) == 0 || f.Extensions[0][0] != '.' {
			t.Errorf("%+v", f)
		}
		for _, head := range [][]byte{nil, {0}, []byte("no such format")} {
			if f.Recognise(head) {
				t.Errorf("%s recognises %q", f.Name, head)
			}
		}
	}
}

func TestAPanicInAReaderIsABug(t *testing.T) {
	broken := Format{Name: "broken", Read: func(_ string, data []byte, _ Limits) ([]acquisition.Array, error) {
		_ = data[len(data)]
		return nil, nil
	}}
	arrays, err := broken.guarded("traces.x", []byte{1}, Default)
	f := wantFault(t, err, fault.Bug)
	if arrays != nil || f.Where != "traces.x" || !strings.Contains(f.Text, "index out of range") {
		t.Errorf("%v, %v", arrays, f)
	}
}

func TestAMemberThatIsNoArrayIsHandedOverAsBytes(t *testing.T) {
	data := zipOf(t, member{"x.npy", npyOf("<f8", "(0,)", nil)}, member{"readme.txt", []byte("hello")})
	arrays, err := Read("traces.npz", data)
	if err != nil || len(arrays) != 2 || arrays[1].Name != "readme.txt" || string(arrays[1].Raw()) != "hello" {
		t.Errorf("%+v, %v", arrays, err)
	}
}

func TestASingleArrayIsNamedAfterItsFile(t *testing.T) {
	arrays, err := Read("folder/delay_us.npy", npyOf("<f8", "(0,)", nil))
	if err != nil || len(arrays) != 1 || arrays[0].Name != "delay_us" {
		t.Errorf("%+v, %v", arrays, err)
	}
}
