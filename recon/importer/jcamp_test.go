package importer

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"torrloom/recon/fault"
)

// spectrum returns a block of one table.
func spectrum(points int, lines string) string {
	return fmt.Sprintf("##TITLE= x\n##JCAMP-DX= 5.01\n##DATA TYPE= EMR SPECTRUM\n##XUNITS= ns\n##YUNITS= ARBITRARY UNITS\n##XFACTOR= 1\n##YFACTOR= 1\n"+
		"##FIRSTX= 1\n##LASTX= %d\n##NPOINTS= %d\n##XYDATA= (X++(Y..Y))\n%s\n##END=\n", points, points, lines)
}

// The spectrum by which McDonald and Wilks (1988) show the packings of one line. It is quoted from memory; that the plain
// and the packed line, quoted apart, decode to the same 53 numbers is what makes it evidence.
func TestThePublishedLineInEveryPacking(t *testing.T) {
	const plain = "0 0 0 0 2 4 4 4 7 5 4 4 5 5 7 10 11 11 6 5 7 6 9 9 7 10 10 9 10 11 12 15 16 16 14 17 38 38 35 38 42 47 54 59 66 75 78 88 96 104 110 121 128"
	const line = "599.860@VKT%TLkj%J%KLJ%njKjL%kL%jJULJ%kLK1%lLMNPNPRLJ0QTOJ1P"
	var want []float64
	for _, word := range strings.Fields(plain) {
		want = append(want, numberIn(word))
	}
	var squeezed, signed string
	for _, v := range want {
		text := fmt.Sprint(v)
		squeezed += string(sqzPlus[text[0]-'0']) + text[1:]
		signed += "+" + text
	}
	for form, lines := range map[string][]string{
		"AFFN": {"599.860 " + plain}, "PAC": {"599.860" + signed}, "SQZ": {"599.860" + squeezed}, "DIF and DUP": {line,
			"700.158A28"},
	} {
		var numbered []textLine
		for i, text := range lines {
			numbered = append(numbered, textLine{i + 1, []byte(text)})
		}
		got, starts, err := decodeASDF(numbered, 1000)
		if err != nil || !slices.Equal(got, want) || starts[0] != (abscissa{599.86, 0, 1}) {
			t.Errorf("%s: %v, %v, %v", form, got, starts, err)
		}
		if len(starts) == 2 && starts[1].at != 52 {
			t.Errorf("the abscissa before a check stands for the value checked, %d", starts[1].at)
		}
	}
}

// pack writes whole numbers in DIF and DUP form, some values to a line, independently of the decoder.
func pack(values []int, perLine int) string {
	letter := func(plus, minus string, v int) string {
		text := fmt.Sprint(max(v, -v))
		if v < 0 {
			return string(minus[text[0]-'1']) + text[1:]
		}
		return string(plus[text[0]-'0']) + text[1:]
	}
	var out strings.Builder
	for start := 0; start < len(values)-1; start += perLine {
		fmt.Fprintf(&out, "%d%s", start+1, letter(sqzPlus, sqzMinus, values[start]))
		end := min(start+perLine, len(values)-1)
		for i := start + 1; i <= end; {
			step, n := values[i]-values[i-1], 1
			for i+n <= end && values[i+n]-values[i+n-1] == step {
				n++
			}
			out.WriteString(letter(difPlus, difMinus, step))
			if n > 1 {
				text := fmt.Sprint(n)
				out.WriteString(string(dupTimes[text[0]-'1']) + text[1:])
			}
			i += n
		}
		out.WriteString("\n")
	}
	fmt.Fprintf(&out, "%d%s", len(values), letter(sqzPlus, sqzMinus, values[len(values)-1]))
	return out.String()
}

func TestPackedTablesComeBack(t *testing.T) {
	random := rand.New(rand.NewPCG(1, 2))
	for range 100 {
		values := make([]int, 2+random.IntN(300))
		for i := range values {
			values[i] = random.IntN(7) - 3
			if random.IntN(10) == 0 {
				values[i] = random.IntN(2_000_000) - 1_000_000
			}
			if i > 0 && random.IntN(3) == 0 {
				values[i] = values[i-1]
			}
		}
		text := spectrum(len(values), pack(values, 1+random.IntN(60)))
		arrays, err := Read("x.dx", []byte(text))
		if err != nil {
			t.Fatalf("%v\n%s", err, text)
		}
		got, _ := arrays[1].Float64s()
		for i, v := range values {
			if len(got) != len(values) || got[i] != float64(v) {
				t.Fatalf("value %d of %d: %v, want %d\n%s", i, len(values), got, v, text)
			}
		}
	}
}

func TestACheckValueThatDoesNotAgreeIsAFaultWithItsLine(t *testing.T) {
	good := spectrum(4, "1A0JJ\n3A2J\n4A3")
	if _, err := Read("x.dx", []byte(good)); err != nil {
		t.Fatal(err)
	}
	_, err := Read("x.dx", []byte(strings.Replace(good, "3A2J", "3A4J", 1)))
	f := wantFault(t, err, fault.BadFile)
	if f.Where != "x.dx line 13" || !strings.Contains(f.Text, "is 14, its differences add up to 12") {
		t.Error(f)
	}
	_, err = Read("x.dx", []byte(strings.Replace(good, "3A2J\n4A3\n", "", 1)))
	f = wantFault(t, err, fault.BadFile)
	if !strings.Contains(f.Text, "3 values in a table of 4 points") {
		t.Error(f)
	}
	_, err = Read("x.dx", []byte(strings.TrimSuffix(good, "##END=\n")))
	wantFault(t, err, fault.BadFile)
}

func TestALineAtTheWrongAbscissaIsDoubted(t *testing.T) {
	for lines, doubted := range map[string]bool{"1 1 2 3\n4 4 5": false, "1 1 2 3\n5 4 5": true} {
		arrays, err := Read("x.dx", []byte(spectrum(5, lines)))
		if err != nil || strings.Contains(arrays[1].Attributes["doubt"], "line 13 begins at 5") != doubted {
			t.Errorf("%q: %+v, %v", lines, arrays, err)
		}
	}
}

func TestPlainTablesWithExponentsAndUnknownValues(t *testing.T) {
	text := spectrum(5, "1 1.5E+03 -2e1 ?\n4 3E2, -.5")
	arrays, err := Read("x.dx", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	holds(t, arrays[0], []int{5}, 1, 2, 3, 4, 5)
	holds(t, arrays[1], []int{5}, 1500, -20, math.NaN(), 300, -0.5)
	if arrays[0].Unit != "ns" || arrays[1].Unit != "" || arrays[1].Attributes["TITLE"] != "x" {
		t.Errorf("%+v", arrays)
	}
}

// quadrature is a trace as NTUPLES with a page for each part, and labels of the sender's own.
func quadrature(shot int) string {
	return fmt.Sprintf(`##TITLE= shot %d $$ a comment
##JCAMP-DX= 5.01
##DATATYPE= EMR FID
##.MICROWAVE FREQUENCY= 721.5
##$GX= %d
##$DELAYUS= 0.5, 1, 8
##$DWELL= 4 ns
##$SEQUENCE= <inversion-recovery>
##NTUPLES= EMR FID
##VAR_NAME= TIME, REAL, IMAGINARY, PAGE NUMBER
##SYMBOL= X, R, I, N
##VAR_TYPE= INDEPENDENT, DEPENDENT, DEPENDENT, PAGE
##VAR_FORM= AFFN, ASDF, ASDF, AFFN
##VAR_DIM= 4, 4, 4, 2
##UNITS= NANOSECONDS, ARBITRARY UNITS, ARBITRARY UNITS,
##FIRST= 0, 1, 2, 1
##LAST= 12, 1, 2, 2
##FACTOR= 4, 0.5, 0.5, 1
##PAGE= N=1
##DATA TABLE= (X++(R..R)), XYDATA
0+%dJ
1+%dKJ
3+%d
##PAGE= N=2
##DATA TABLE= (X++(I..I)), XYDATA
0 2 4 6 8
##END NTUPLES= EMR FID
##END=
`, shot, 10*shot, shot, shot+1, shot+4)
}

func TestRealAndImaginaryPagesAndUserLabels(t *testing.T) {
	arrays, err := Read("x.dx", []byte(quadrature(11)))
	if err != nil {
		t.Fatal(err)
	}
	got := map[string]int{}
	for i, a := range arrays {
		got[a.Name] = i
	}
	holds(t, arrays[got["x"]], []int{4}, 0, 4, 8, 12)
	holds(t, arrays[got["real"]], []int{4}, 5.5, 6, 7, 7.5)
	holds(t, arrays[got["imaginary"]], []int{4}, 1, 2, 3, 4)
	holds(t, arrays[got["GX"]], []int{}, 110)
	holds(t, arrays[got["DELAYUS"]], []int{3}, 0.5, 1, 8)
	texts, err := arrays[got["SEQUENCE"]].Strings()
	real := arrays[got["real"]]
	if err != nil || texts[0] != "inversion-recovery" || len(arrays) != 7 || arrays[got["DWELL"]].Unit != "ns" ||
		real.Attributes[".MICROWAVE FREQUENCY"] != "721.5" || real.Attributes["$GX"] != "110" ||
		real.Attributes["TITLE"] != "shot 11" {
		t.Errorf("%+v", arrays)
	}
}

func TestLinkedBlocksBecomeOneArray(t *testing.T) {
	text := "##TITLE= all\n##JCAMP-DX= 5.01\n##DATA TYPE= LINK\n##BLOCKS= 12\n"
	for shot := range 12 {
		text += quadrature(shot)
	}
	arrays, err := Read("x.dx", []byte(text+"##END=\n"))
	if err != nil {
		t.Fatal(err)
	}
	for _, a := range arrays {
		switch a.Name {
		case "x":
			holds(t, a, []int{4}, 0, 4, 8, 12)
		case "GX":
			holds(t, a, []int{12}, 0, 10, 20, 30, 40, 50, 60, 70, 80, 90, 100, 110)
		case "real":
			v, err := a.Float64s()
			if err != nil || !slices.Equal(a.Shape, []int{12, 4}) || v[4*11+3] != 7.5 {
				t.Errorf("%v of shape %v", v, a.Shape)
			}
		}
	}
	if len(arrays) != 7 {
		t.Errorf("%d arrays", len(arrays))
	}
}

func TestPagesOfATwoDimensionalExperimentAreStacked(t *testing.T) {
	text := quadrature(1)
	text = strings.ReplaceAll(text, "SYMBOL= X, R, I, N", "SYMBOL= X, R, I, T")
	text = strings.ReplaceAll(text, "ARBITRARY UNITS,\n", "ARBITRARY UNITS, us\n")
	text = strings.Replace(text, "N=1", "T=0.5", 1)
	text = strings.Replace(strings.Replace(text, "N=2", "T=8", 1), "(I..I)", "(R..R)", 1)
	arrays, err := Read("x.dx", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	holds(t, arrays[1], []int{2, 4}, 0.5, 1, 2, 2.5, 1, 2, 3, 4)
	holds(t, arrays[2], []int{2}, 0.5, 8)
	if arrays[2].Name != "T" || arrays[2].Unit != "us" {
		t.Errorf("%+v", arrays[2])
	}
}

func TestJCAMPLimits(t *testing.T) {
	small := Default
	small.Elements = 100
	reads(t, "x.dx", []byte(spectrum(100, "1A0S00")), small) // 10, a hundred times
	tooLarge(t, "x.dx", []byte(spectrum(101, "1A0S01")), small)
	tooLarge(t, "x.dx", []byte(spectrum(101, "1A0S999999999999999999")), Default) // past 200 values for each byte
	nested := func(n int) []byte {
		return []byte(strings.Repeat("##TITLE= x\n##DATA TYPE= LINK\n", n-1) + spectrum(1,
			"1 1") + strings.Repeat("##END=\n", n-1))
	}
	reads(t, "x.dx", nested(32), Default)
	tooLarge(t, "x.dx", nested(33), Default)
	small = Default
	small.Arrays = 2
	reads(t, "x.dx", []byte(strings.Repeat(spectrum(1, "1 1"), 2)), small)
	tooLarge(t, "x.dx", []byte(strings.Repeat(spectrum(1, "1 1"), 3)), small)
}
