package importer

import (
	"bytes"
	"compress/gzip"
	"fmt"
	"strings"
	"testing"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

func byNames(arrays []acquisition.Array) map[string]acquisition.Array {
	out := map[string]acquisition.Array{}
	for _, a := range arrays {
		out[a.Name] = a
	}
	return out
}

// series is one table for every shot, and a table of gradients.
func series(shots int) []File {
	files := []File{{"scan/gradients.csv", []byte("gx,gy\n" + strings.Repeat("1,2\n", shots))}, {"scan/.hidden", nil},
		{"scan/read me.txt", []byte("words only")}}
	for s := shots; s >= 1; s-- {
		files = append(files, File{fmt.Sprintf("scan/shot_%d.csv", s), fmt.Appendf(nil, "t,re,im\n0,%d,0\n1,%d,5\n", s,
			10*s)})
	}
	return files
}

func TestOneFilePerShotInTheOrderOfNumbers(t *testing.T) {
	tree, err := ReadSet(series(12)) // "shot_10" stands before "shot_2" in the alphabet
	if err != nil {
		t.Fatal(err)
	}
	got := byNames(tree.Arrays)
	holds(t, got["t"], []int{2}, 0, 1)
	re, err := got["re"].Float64s()
	if err != nil || re[2*9] != 10 || re[2*1] != 2 || len(got) != 5 || got["re"].Shape[0] != 12 || got["gx"].Len() != 12 {
		t.Errorf("%v, %v, %v", got, re, err)
	}
	if len(tree.Notes) != 2 || !strings.Contains(tree.Notes[0], "read me.txt") ||
		!strings.Contains(tree.Notes[1], "12 files, scan/shot_1.csv to scan/shot_12.csv") {
		t.Errorf("%q", tree.Notes)
	}
}

func TestTheSameSetInAnArchive(t *testing.T) {
	var members []member
	for _, f := range series(3) {
		members = append(members, member{f.Name, f.Data})
	}
	arrays, err := Read("scan.zip", zipOf(t, members...))
	if err != nil || len(arrays) != 5 {
		t.Fatalf("%v, %v", arrays, err)
	}
	holds(t, byNames(arrays)["re"], []int{3, 2}, 1, 10, 2, 20, 3, 30)
}

func TestTwoRunningNumbersMakeTwoAxes(t *testing.T) {
	var files []File
	for d := range 2 {
		for s := range 3 {
			files = append(files, File{fmt.Sprintf("2026-T%02d-S%d.csv", d, s), fmt.Appendf(nil, "v\n%d\n7\n", 10*d+s)})
		}
	}
	tree, err := ReadSet(files)
	if err != nil {
		t.Fatal(err)
	}
	holds(t, byNames(tree.Arrays)["v"], []int{2, 3, 2}, 0, 7, 1, 7, 2, 7, 10, 7, 11, 7, 12, 7)
}

func TestAShotOfAnotherLengthIsAFaultWithBothShapes(t *testing.T) {
	files := series(3)
	files[4].Data = []byte("t,re,im\n0,1,2\n")
	_, err := ReadSet(files)
	f := wantFault(t, err, fault.BadFile)
	if !strings.Contains(f.Error(), "shot_2.csv") || !strings.Contains(f.Error(), "[1]") ||
		!strings.Contains(f.Error(), "[2]") {
		t.Error(f)
	}
	files[4].Data = []byte("t,re\n0,1\n1,2\n")
	_, err = ReadSet(files)
	wantFault(t, err, fault.BadFile)
}

func TestTracesInOneFileAndGradientsInAnother(t *testing.T) {
	signal := npyOf("<c8", "(2, 3, 4)", make([]byte, 8*24))
	tree, err := ReadSet([]File{{"signal.npy", signal}, {"gradient_mT_per_m.csv", []byte("1 0 0\n0 1 0\n0 0 2\n")},
		{"x/n.csv", []byte("v\n1\n")}, {"y/n.csv", []byte("v\n2\n")}})
	if err != nil {
		t.Fatal(err)
	}
	got := byNames(tree.Arrays)
	holds(t, got["gradient_mT_per_m"], []int{3, 3}, 1, 0, 0, 0, 1, 0, 0, 0, 2)
	holds(t, got["x/n/v"], []int{1}, 1)
	holds(t, got["y/n/v"], []int{1}, 2)
}

func packed(t testing.TB, data []byte) []byte {
	t.Helper()
	var out bytes.Buffer
	w := gzip.NewWriter(&out)
	if _, err := w.Write(data); err != nil {
		t.Fatal(err)
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	return out.Bytes()
}

func TestGzipLimits(t *testing.T) {
	row := "1,2\n"
	text := []byte(strings.Repeat(row, 50_000))
	small := Default
	small.HarmlessBytes, small.Ratio = int64(len(text)), 1
	reads(t, "x.csv.gz", packed(t, text), small)
	small.HarmlessBytes--
	tooLarge(t, "x.csv.gz", packed(t, text), small)
	small.Ratio = int64(len(text)/len(packed(t, text))) + 1
	reads(t, "x.csv.gz", packed(t, text), small)
	whole := packed(t, text)
	_, err := Read("x.csv.gz", whole[:len(whole)-9])
	wantFault(t, err, fault.BadFile)
}

func TestNestingLimitOfArchives(t *testing.T) {
	data := []byte("1,2\n3,4\n")
	for range 32 {
		data = packed(t, data)
	}
	reads(t, "x.csv", data, Default)
	tooLarge(t, "x.csv", packed(t, data), Default)
}

func TestArchivesInArchivesShareWhatTheyMayUnpackTo(t *testing.T) {
	text := []byte("1,2\n3,4\n")
	inner := packed(t, text)
	small := Default
	small.UnpackedBytes = int64(len(inner) + len(text))
	reads(t, "x.csv", packed(t, inner), small)
	small.UnpackedBytes--
	tooLarge(t, "x.csv", packed(t, inner), small)
}

func TestFileLimitOfASet(t *testing.T) {
	small := Default
	small.Arrays = len(series(3))
	if _, err := ReadSetWithin(small, series(3)); err != nil {
		t.Error(err)
	}
	_, err := ReadSetWithin(small, series(4))
	wantFault(t, err, fault.TooLarge)
}

func TestNothingToReadIsTheFirstRefusal(t *testing.T) {
	_, err := ReadSet([]File{{"a.txt", []byte("words")}, {"b.txt", []byte("more words")}})
	f := wantFault(t, err, fault.Unsupported)
	if f.Where != "a.txt" {
		t.Error(f)
	}
	_, err = ReadSet(nil)
	wantFault(t, err, fault.BadFile)
}
