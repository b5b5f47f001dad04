package importer

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// readText reads a table of text.
func readText(t *testing.T, text string) map[string]acquisition.Array {
	t.Helper()
	arrays, err := Read("traces.csv", []byte(text))
	if err != nil {
		t.Fatalf("%q: %v", text, err)
	}
	out := map[string]acquisition.Array{}
	for _, a := range arrays {
		out[a.Name] = a
	}
	if len(out) != len(arrays) {
		t.Errorf("%q: two arrays of one name", text)
	}
	return out
}

// holds fails unless an array has exactly these values, NaN among them.
func holds(t *testing.T, a acquisition.Array, shape []int, want ...float64) {
	t.Helper()
	got, err := a.Float64s()
	if err != nil || !slices.Equal(a.Shape, shape) || !slices.EqualFunc(got, want, sameNumber) {
		t.Errorf("%q: %v of shape %v, want %v of %v (%v)", a.Name, got, a.Shape, want, shape, err)
	}
}

func TestEveryWayToWriteATableReadsTheSame(t *testing.T) {
	utf16 := func(text string) string {
		out := "\xff\xfe"
		for _, c := range []byte(text) {
			out += string([]byte{c, 0})
		}
		return out
	}
	for _, text := range []string{
		"x,y\n1.5,-2\n2.5,3e2\n",
		"x,y\r\n1.5,-2\r\n2.5,3e2\r\n",
		"x,y\r1.5,-2\r2.5,3e2",
		"x;y\n1,5;-2\n2,5;3e2\n",
		"x\ty\n1,5\t-2\n2,5\t3e2\n",
		"x\ty\n1.5\t-2\n2.5\t3e2\n",
		"x|y\n1.5|-2\n2.5|3e2\n",
		"x y\n1,5 -2\n2,5 3e2\n",
		"  x   y\n 1.5    -2\n\n 2.5  3e2\n",
		"# x y\n1.5 -2\n2.5 3e2\n",
		"% x, y\n1.5, -2\n2.5, 3e2\n",
		"\"x\",\"y\"\n\"1.5\",\"-2\"\n2.5 , 3D2\n",
		"x,y,\n1.5,-2,\n2.5,3E+2,\n",
		"\xef\xbb\xbfx,y\n1.5,-2\n2.5,300\n",
		utf16("x,y\n1.5,-2\n2.5,300\n"),
	} {
		got := readText(t, text)
		holds(t, got["x"], []int{2}, 1.5, 2.5)
		holds(t, got["y"], []int{2}, -2, 300)
		if len(got) != 2 || got["x"].Attributes["guess"] != "" {
			t.Errorf("%q: %d arrays, guess %q", text, len(got), got["x"].Attributes["guess"])
		}
	}
}

func TestWhatATableCouldAlsoBeIsSaid(t *testing.T) {
	got := readText(t, "1,5\n2,7\n3,6\n")
	holds(t, got["traces"], []int{3, 1}, 5, 7, 6)
	if guess := got["traces"].Attributes["guess"]; !strings.Contains(guess, "decimal comma it would be 1") {
		t.Errorf("guess %q", guess)
	}
	got = readText(t, "a;b\n1,500;2,300\n4,100;5,250\n")
	holds(t, got["a"], []int{2}, 1.5, 4.1)
	if guess := got["a"].Attributes["guess"]; !strings.Contains(guess, "thousands") {
		t.Errorf("guess %q", guess)
	}
	arrays, err := ReadColumns(Default, "x.csv", []byte("1,5\n2,7\n3,6\n"), Dialect{';', ','})
	if err != nil || len(arrays) != 1 {
		t.Fatal(arrays, err)
	}
	holds(t, arrays[0], []int{3}, 1.5, 2.7, 3.6)
	_, err = ReadColumns(Default, "x.csv", []byte("1,5\n"), Dialect{',', ','})
	wantFault(t, err, fault.BadSetting)
}

func TestWordsForNoNumberAreNaN(t *testing.T) {
	nan := math.NaN()
	got := readText(t, "a,b\n1,2\nNaN,\n-1.#IND,N/A\n-inf,1.#INF\n1e999,--\n")
	holds(t, got["a"], []int{5}, 1, nan, nan, math.Inf(-1), math.Inf(1))
	holds(t, got["b"], []int{5}, 2, nan, nan, math.Inf(1), nan)
}

func TestUnitsComeFromNamesAndFromARowOfTheirOwn(t *testing.T) {
	for _, text := range []string{"t [us],v (mV)\n1,2\n2,3\n", "t,v\nus,mV\n1,2\n2,3\n", "t / us,v / mV\n1,2\n2,3\n",
		"t;v\n[us];[mV]\n1;2\n2;3\n"} {
		got := readText(t, text)
		if got["t"].Unit != "us" || got["v"].Unit != "mV" {
			t.Errorf("%q: units %q, %q", text, got["t"].Unit, got["v"].Unit)
		}
	}
}

func TestColumnsWithRunningNumbersBecomeOneArray(t *testing.T) {
	got := readText(t, "t,re_10,im_10,re_9,im_9\n0,1,2,3,4\n1,5,6,7,8\n")
	holds(t, got["re_#"], []int{2, 2}, 3, 7, 1, 5) // shot 9 before shot 10
	holds(t, got["im_#"], []int{2, 2}, 4, 8, 2, 6)
	holds(t, got["t"], []int{2}, 0, 1)
	got = readText(t, "d0s0,d0s1,d0s2,d1s0,d1s1,d1s2\n1,2,3,4,5,6\n7,8,9,10,11,12\n")
	holds(t, got["d#s#"], []int{2, 3, 2}, 1, 7, 2, 8, 3, 9, 4, 10, 5, 11, 6, 12)
}

func TestAFirstColumnInEvenStepsIsAnAxis(t *testing.T) {
	got := readText(t, "0 5 6\n0.1 7 8\n0.2 9 1\n")
	holds(t, got["first column"], []int{3}, 0, 0.1, 0.2)
	holds(t, got["traces"], []int{3, 2}, 5, 6, 7, 8, 9, 1)
	if !got["traces"].AfterFile || got["first column"].Attributes["guess"] == "" {
		t.Errorf("%+v", got)
	}
	got = readText(t, "0 5 6\n1 7 8\n3 9 1\n")
	holds(t, got["traces"], []int{3, 3}, 0, 5, 6, 1, 7, 8, 3, 9, 1)
}

func TestCommentsStateValues(t *testing.T) {
	got := readText(t,
		"# dwell: 4 ns\n# delay_us = [0.5, 1, 8]\n# sequence = echo-decay\n# written at noon\n# x = 3\nx,y\n1,2\n3,4\n")
	holds(t, got["dwell"], []int{}, 4)
	holds(t, got["delay_us"], []int{3}, 0.5, 1, 8)
	texts, err := got["sequence"].Strings()
	if err != nil || texts[0] != "echo-decay" || got["dwell"].Unit != "ns" || len(got) != 5 {
		t.Errorf("%+v, %q, %v", got, texts, err)
	}
}

func TestComplexFieldsAndTextFields(t *testing.T) {
	got := readText(t, "a,name,b\n1+2j,north,1\n(3-4e-1i),south,2\n-5j,east,3\n( 6.0e+00+-1.0e+00j),west,4\n")
	values, err := got["a"].Complex64s()
	if err != nil || !slices.Equal(values, []complex64{1 + 2i, 3 - 0.4i, -5i, 6 - 1i}) {
		t.Errorf("%v, %v", values, err)
	}
	texts, err := got["name"].Strings()
	if err != nil || !slices.Equal(texts, []string{"north", "south", "east", "west"}) {
		t.Errorf("%q, %v", texts, err)
	}
}

func TestARaggedTableIsAFaultWithLineAndBothNumbers(t *testing.T) {
	text := "a,b,c\n" + strings.Repeat("1,2,3\n", 410) + "1,2\n" + strings.Repeat("1,2,3\n", 3)
	_, err := Read("traces.csv", []byte(text))
	f := wantFault(t, err, fault.BadFile)
	if f.Where != "traces.csv line 412" || !strings.Contains(f.Text, "2 fields, line 2 has 3") {
		t.Error(f)
	}
	_, err = Read("traces.csv", []byte(strings.Replace(text, "1,2\n", "1,2,1.2.3\n", 1)))
	f = wantFault(t, err, fault.BadFile)
	if f.Where != "traces.csv line 412 column 3" || !strings.Contains(f.Text, `"1.2.3"`) {
		t.Error(f)
	}
}

func TestProseAndCodeAreNoColumns(t *testing.T) {
	for _, text := range []string{"hello", "{\"recipe\": 1}\n", "<html>\n<p>1</p>\n",
		"Dear reader,\nthis is 1 line.\nAnd another, of words.\n"} {
		if looksLikeColumns([]byte(text)) {
			t.Errorf("%q was taken for a table", text)
		}
	}
}

func TestColumnLimits(t *testing.T) {
	small := Default
	small.Elements = 12
	row := "1,2,3\n"
	reads(t, "x.csv", []byte(strings.Repeat(row, 4)), small)
	tooLarge(t, "x.csv", []byte(strings.Repeat(row, 5)), small)
	small = Default
	small.Arrays = 3
	reads(t, "x.csv", []byte("a,b,c\n1,2,3\n"), small)
	tooLarge(t, "x.csv", []byte("a,b,c,d\n1,2,3,4\n"), small)
}

// A wide table begins with a line longer than what a format sees of a file.
func TestAWideTableIsRecognisedByItsNames(t *testing.T) {
	var names, values []string
	for i := range 3000 {
		names = append(names, fmt.Sprintf("shot_%d", i))
		values = append(values, fmt.Sprint(i))
	}
	got := readText(t, strings.Join(names, ",")+"\n"+strings.Join(values, ",")+"\n"+strings.Join(values, ",")+"\n")
	if len(got) != 1 || !slices.Equal(got["shot_#"].Shape, []int{3000, 2}) {
		t.Errorf("%v", got)
	}
}
