// Package draw holds no Go; its tests hold what the page's drawing promises about colours, digits and places. They
// bundle the TypeScript, run it with node, and judge what it returns with their own arithmetic.
package draw

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"os"
	"os/exec"
	"strings"
	"testing"

	"github.com/evanw/esbuild/pkg/api"

	"torrloom/recon/session"
)

// evaluate returns what the expression is in TypeScript, after the import lines.
func evaluate[T any](t *testing.T, imports, expression string) T {
	t.Helper()
	folder, err := os.Getwd()
	if err != nil {
		t.Fatal(err)
	}
	source := imports + "\nconsole.log(JSON.stringify(" + expression + "))"
	built := api.Build(api.BuildOptions{
		Stdin:  &api.StdinOptions{Contents: source, ResolveDir: folder, Loader: api.LoaderTS},
		Bundle: true, Write: false, Platform: api.PlatformNode, Target: api.ES2022,
	})
	if len(built.Errors) > 0 {
		t.Fatalf("%s: %s", source, built.Errors[0].Text)
	}
	node := exec.Command("node", "-")
	node.Stdin = bytes.NewReader(built.OutputFiles[0].Contents)
	out, err := node.CombinedOutput()
	if err != nil {
		t.Fatalf("node: %v\n%s", err, out)
	}
	var value T
	if err := json.Unmarshal(out, &value); err != nil {
		t.Fatalf("%v in %.200s", err, out)
	}
	return value
}

type colourMap struct {
	Name  string
	Table []uint32
}

func colourMaps(t *testing.T) []colourMap {
	maps := evaluate[[]colourMap](t, `import { colourMaps, tableFor } from "./colour"`,
		`colourMaps.map(({name, quantity}) => ({name, table: [...tableFor(quantity)]}))`)
	if len(maps) < 3 {
		t.Fatalf("%d colour maps; amplitude, rate and pO2 need one each", len(maps))
	}
	return maps
}

// vision is how linear sRGB is seen. Source: Machado, Oliveira, Fernandes, "A physiologically-based model for
// simulation of color vision deficiency", IEEE Trans. Vis. Comput. Graph. 15 (2009) 1291, severity 1.
var vision = map[string][3][3]float64{
	"common": {{1, 0, 0}, {0, 1, 0}, {0, 0, 1}},
	"protan": {{0.152286, 1.052583, -0.204868}, {0.114503, 0.786281, 0.099216}, {-0.003882, -0.048116, 1.051998}},
	"deutan": {{0.367322, 0.860646, -0.227968}, {0.280085, 0.672501, 0.047413}, {-0.011820, 0.042940, 0.968881}},
	"tritan": {{1.255528, -0.076749, -0.178779}, {-0.078411, 0.930809, 0.147602}, {0.004733, 0.691367, 0.303900}},
}

// seen returns OKLab coordinates of a packed pixel. Source of the matrices: B. Ottosson, "A perceptual color space for
// image processing" (2020).
func seen(pixel uint32, by [3][3]float64) [3]float64 {
	var linear [3]float64
	for c := range 3 {
		v := float64(pixel>>(8*c)&255) / 255
		if linear[c] = v / 12.92; v > 0.04045 {
			linear[c] = math.Pow((v+0.055)/1.055, 2.4)
		}
	}
	rgb := product(by, linear)
	for c := range rgb {
		rgb[c] = math.Max(rgb[c], 0)
	}
	lms := product([3][3]float64{
		{0.4122214708, 0.5363325363, 0.0514459929},
		{0.2119034982, 0.6806995451, 0.1073969566},
		{0.0883024619, 0.2817188376, 0.6299787005}}, rgb)
	for c := range lms {
		lms[c] = math.Cbrt(lms[c])
	}
	return product([3][3]float64{
		{0.2104542553, 0.7936177850, -0.0040720468},
		{1.9779984951, -2.4285922050, 0.4505937099},
		{0.0259040371, 0.7827717662, -0.8086757660}}, lms)
}

func product(m [3][3]float64, v [3]float64) [3]float64 {
	var out [3]float64
	for i := range 3 {
		out[i] = m[i][0]*v[0] + m[i][1]*v[1] + m[i][2]*v[2]
	}
	return out
}

// stride is wide enough that rounding to bytes, 0.004 in lightness at the dark end, stays small against a step.
const stride = 33

func TestColourMapsRiseInLightnessForEveryKindOfColourVision(t *testing.T) {
	for _, m := range colourMaps(t) {
		for kind, by := range vision {
			first, last := seen(m.Table[0], by), seen(m.Table[len(m.Table)-1], by)
			if !(last[0]-first[0] >= 0.75) {
				t.Errorf("%s, %s: lightness spans %.3f, 0.75 keeps the order readable", m.Name, kind, last[0]-first[0])
			}
			for i := stride; i < len(m.Table); i += stride {
				if !(seen(m.Table[i], by)[0] > seen(m.Table[i-stride], by)[0]) {
					t.Errorf("%s, %s: lightness does not rise up to entry %d", m.Name, kind, i)
				}
			}
		}
	}
}

func TestColourMapStepsLookEven(t *testing.T) {
	for _, m := range colourMaps(t) {
		least, sum, steps := math.Inf(1), 0.0, 0.0
		for i := stride; i < len(m.Table); i += stride {
			a, b := seen(m.Table[i-stride], vision["common"]), seen(m.Table[i], vision["common"])
			d := math.Sqrt((a[0]-b[0])*(a[0]-b[0]) + (a[1]-b[1])*(a[1]-b[1]) + (a[2]-b[2])*(a[2]-b[2]))
			least, sum, steps = math.Min(least, d), sum+d, steps+1
		}
		// A step of 0.85 of the mean is not seen as a flat spot; bytes alone cost up to 0.08.
		if !(least/(sum/steps) >= 0.85) {
			t.Errorf("%s: the least step is %.3f of the mean", m.Name, least/(sum/steps))
		}
	}
}

func TestTextsHaveNoMoreDigitsThanTheErrorAllows(t *testing.T) {
	for _, c := range []struct{ call, want string }{
		{"withError(23.1468, 1.234)", "23.1 ± 1.2"},
		{"withError(0.51237, 0.0119)", "0.512 ± 0.012"},
		{"withError(-3.14159, 0.5)", "−3.14 ± 0.50"},
		{"withError(812.3, 140)", "812 ± 140"},
		{"withError(NaN, 1)", "no answer ± 1.0"},
		{"withError(2, 0)", "2.00"},
		{"fixed(-0.001, 1)", "0.0"},
		{"significant(0.0004567)", "0.000457"},
		{"significant(15.03)", "15.0"},
		{"plain(14.25, 4)", "14.25"},
		{"percent(0)", "0 %"},
		{"percent(0.0004)", "< 0.1 %"},
		{"percent(0.0461)", "4.6 %"},
		{"count(1234567)", "1\u202f234\u202f567"},
		{`unitText("1/us")`, "1/µs"},
	} {
		got := evaluate[string](t, `import { count, fixed, percent, plain, significant, unitText, withError } from "./number"`, c.call)
		if got != c.want {
			t.Errorf("%s is %q, want %q", c.call, got, c.want)
		}
	}
}

// aGrid has three different sizes, so that mixed-up axes show.
const aGrid = `{n: [5, 4, 3], voxelMM: [1, 2, 3], originMM: [-2, -4, -3]}`

func TestSlicesHaveTheirSecondAxisUpwards(t *testing.T) {
	for plane, at := range map[string]func(column, row int) int{
		"xy": func(column, row int) int { return (1*4+(3-row))*5 + column },
		"xz": func(column, row int) int { return ((2-row)*4+1)*5 + column },
		"yz": func(column, row int) int { return ((2-row)*4+column)*5 + 1 },
	} {
		seen := evaluate[[][3]int](t, `import { walk } from "./slice"`, fmt.Sprintf(
			`(() => { const all: number[][] = []; walk({grid: %s, plane: %q, at: 1}, (...v) => all.push(v)); return all })()`, aGrid, plane))
		if len(seen) != map[string]int{"xy": 20, "xz": 15, "yz": 12}[plane] {
			t.Errorf("%s: %d voxels visited", plane, len(seen))
		}
		for _, v := range seen {
			if want := at(v[1], v[2]); v[0] != want {
				t.Errorf("%s: column %d row %d shows element %d, want %d", plane, v[1], v[2], v[0], want)
			}
		}
	}
}

func TestAPointOfTheCanvasMeansTheVoxelThatIsDrawnThere(t *testing.T) {
	// In x-y the 5 x 4 voxels fill a square of 5 x 5 cells with half a cell free above and below.
	for _, c := range []struct {
		x, y float64
		want [3]int
	}{
		{0.1, 0.2, [3]int{0, 3, 1}}, {0.9, 0.8, [3]int{4, 0, 1}}, {0.5, 0.45, [3]int{2, 2, 1}},
		{0.5, 0.01, [3]int{2, 3, 1}}, {-1, 2, [3]int{0, 0, 1}},
	} {
		got := evaluate[[3]int](t, `import { voxelUnder } from "./scene"`,
			fmt.Sprintf(`voxelUnder({grid: %s, plane: "xy", at: 1}, %g, %g)`, aGrid, c.x, c.y))
		if got != c.want {
			t.Errorf("point %g, %g is voxel %v, want %v", c.x, c.y, got, c.want)
		}
	}
}

func TestVoxelsAndPlacesAgree(t *testing.T) {
	got := evaluate[[][3]float64](t, `import { centreOf, indexOf, voxelAt } from "./grid"`, fmt.Sprintf(
		`[voxelAt(%[1]s, [0, 0, 0]), centreOf(%[1]s, [2, 2, 1]), voxelAt(%[1]s, [99, -99, 1.6]), [indexOf(%[1]s, [4, 3, 2]), 0, 0]]`, aGrid))
	// The gradient centre is voxel floor(n/2); the last element of 5 x 4 x 3 is 59.
	want := [][3]float64{{2, 2, 1}, {0, 0, 0}, {4, 0, 2}, {59, 0, 0}}
	if fmt.Sprint(got) != fmt.Sprint(want) {
		t.Errorf("got %v, want %v", got, want)
	}
}

func TestWindowsHaveRoundEndsThatHoldTheRange(t *testing.T) {
	for call, want := range map[string]string{
		"rounded(0, 83.2)":       "0 90",
		"rounded(-0.07, 0.64)":   "-0.1 0.7",
		"rounded(3, 3)":          "0 3",
		"rounded(0, 0)":          "0 1",
		"rounded(0.131, 0.6502)": "0.1 0.7",
	} {
		w := evaluate[struct{ Low, High float64 }](t, `import { rounded } from "./window"`, call)
		if got := strings.TrimSpace(fmt.Sprint(w.Low, " ", w.High)); got != want {
			t.Errorf("%s is %s, want %s", call, got, want)
		}
	}
}

func TestQuantilesOfAHistogramAreExactToOneBin(t *testing.T) {
	got := evaluate[[]float64](t, `import { quantileOfBins } from "./window"`,
		`[0.01, 0.5, 0.99].map((share) => quantileOfBins([0, 1, 2, 3, 4], [10, 40, 40, 10], share))`)
	if fmt.Sprint(got) != "[0 2 4]" {
		t.Errorf("got %v, want the outer edges of the bins [0 2 4]", got)
	}
}

func TestUnknownFatesAreNotDrawnAsValues(t *testing.T) {
	got := evaluate[[]string](t, `import { fateOf, fates } from "./fate"`, `[200, fates.length].map((v) => fateOf(v).treatment)`)
	if fmt.Sprint(got) != "[hatch hatch]" {
		t.Errorf("got %v, want hatch", got)
	}
}

func TestEveryFateOfTheEngineIsDrawn(t *testing.T) {
	rows := evaluate[[]struct {
		Value     session.Fate
		Treatment string
		Words     string
	}](t, `import { fates } from "./fate"`, `fates`)
	if len(rows) != len(session.Fates) {
		t.Fatalf("%d rows for the %d fates of the engine", len(rows), len(session.Fates))
	}
	for _, row := range rows {
		valued := row.Value == session.Answered || row.Value == session.Negative
		if drawn := row.Treatment == "colour" || row.Treatment == "negative"; drawn != valued {
			t.Errorf("%s is drawn as %s", session.Fates[row.Value], row.Treatment)
		}
		if !valued && row.Words != session.Fates[row.Value] {
			t.Errorf("the readout says %q, the engine %q", row.Words, session.Fates[row.Value])
		}
	}
}
