package importer

import (
	"cmp"
	"fmt"
	"path"
	"slices"
	"strconv"
	"strings"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// Tree is what was read from one file or from several that belong together.
type Tree struct {
	Arrays []acquisition.Array
	Notes  []string // what was left out or put together, in words
}

// ReadSet returns the arrays of several files that belong together, within the default limits.
//
// Files whose names differ only in their numbers, as "shot_001.csv" and "shot_002.csv" do, are a series, ordered by those
// numbers: each of their arrays gains a leading axis for it (two axes when two numbers run through every pair). What is
// the same single value or the same rising axis in every file of a series stays one. A name that stands in several files
// gets its file's before it: "traces/x".
//
// Errors: as of Read; bad-file when the files of a series differ in shape or names. A file of no known format is left
// out with a note, unless there is no other.
func ReadSet(files []File) (Tree, error) { return ReadSetWithin(Default, files) }

// ReadSetWithin is ReadSet with limits that a person has confirmed.
func ReadSetWithin(limits Limits, files []File) (Tree, error) { return readSet(limits, files, 0) }

// fileArrays is what one file or one series holds.
type fileArrays struct {
	name   string // of the file, for a series with # in the place of its numbers
	arrays []acquisition.Array
	note   string
}

func readSet(limits Limits, files []File, depth int) (Tree, error) {
	if len(files) > limits.Arrays {
		return Tree{}, fault.New(fault.TooLarge, "", "%d files, the limit is %d", len(files), limits.Arrays)
	}
	var tree Tree
	var read []fileArrays
	var refusal error
	for _, f := range files {
		if hidden(f.Name) {
			continue
		}
		one, err := readTree(limits, f.Name, f.Data, depth)
		if err != nil && fault.From(err).Kind == fault.Unsupported {
			tree.Notes = append(tree.Notes, "left out "+err.Error())
			refusal = cmp.Or(refusal, err)
			continue
		}
		if err != nil {
			return Tree{}, err
		}
		tree.Notes = append(tree.Notes, one.Notes...)
		read = append(read, fileArrays{name: f.Name, arrays: one.Arrays})
	}
	if len(read) == 0 {
		if refusal == nil {
			refusal = fault.New(fault.BadFile, "", "no file to read among %d", len(files))
		}
		return Tree{}, refusal
	}
	joined, err := joinSeries(read)
	if err != nil {
		return Tree{}, err
	}
	for _, f := range joined {
		if f.note != "" {
			tree.Notes = append(tree.Notes, f.note)
		}
	}
	tree.Arrays = named(joined)
	return tree, nil
}

// hidden tells the files that systems add to folders and archives.
func hidden(name string) bool {
	return strings.HasPrefix(path.Base(name), ".") || strings.HasPrefix(name, "__MACOSX/") || strings.HasSuffix(name, "/")
}

// joinSeries puts the files of every series together, at the place of its first.
func joinSeries(read []fileArrays) ([]fileArrays, error) {
	series := map[string][]int{}
	for i, f := range read {
		pattern, _ := numbersIn(f.name)
		series[pattern] = append(series[pattern], i)
	}
	var out []fileArrays
	for i, f := range read {
		pattern, _ := numbersIn(f.name)
		members := series[pattern]
		if len(members) == 1 {
			out = append(out, f)
			continue
		}
		if members[0] != i {
			continue
		}
		var group []fileArrays
		for _, at := range members {
			group = append(group, read[at])
		}
		joined, err := join(group)
		if err != nil {
			return nil, err
		}
		out = append(out, joined)
	}
	return out, nil
}

// numbersIn returns a name with # for every run of digits, and the numbers. Digits past 18 are no number of a series and
// stay.
func numbersIn(name string) (pattern string, numbers []int) {
	for rest := name; rest != ""; {
		start := strings.IndexAny(rest, "0123456789")
		if start < 0 {
			return pattern + rest, numbers
		}
		end := start
		for end < len(rest) && rest[end] >= '0' && rest[end] <= '9' {
			end++
		}
		pattern += rest[:start]
		if n, err := strconv.Atoi(rest[start:end]); err == nil {
			numbers = append(numbers, n)
			pattern += "#"
		} else {
			pattern += rest[start:end]
		}
		rest = rest[end:]
	}
	return pattern, numbers
}

// join puts the arrays of the files of one series together.
func join(group []fileArrays) (fileArrays, error) {
	sortByNumbers(group)
	leading := leadingAxes(group)
	pattern := seriesName(group)
	out := fileArrays{name: pattern}
	first, last := group[0], group[len(group)-1]
	for i, a := range first.arrays {
		same := make([]acquisition.Array, len(group))
		for k, f := range group {
			if len(f.arrays) != len(first.arrays) || f.arrays[i].AfterFile != a.AfterFile || !a.AfterFile &&
				f.arrays[i].Name != a.Name {
				return out, fault.New(fault.BadFile, f.name,
					"holds %s, %s holds %s; the files of a series hold the same arrays",
					namesOf(f.arrays), first.name, namesOf(first.arrays))
			}
			same[k] = f.arrays[i]
			same[k].Name = joinWords(f.name, f.arrays[i].Name)
		}
		name := a.Name
		if a.AfterFile {
			name = stem(pattern)
		}
		array, err := joinOne(name, leading, same)
		if err != nil {
			return out, err
		}
		array.AfterFile = a.AfterFile
		out.arrays = append(out.arrays, array)
	}
	out.note = fmt.Sprintf("%d files, %s to %s, were put together in the order of their numbers, as %s", len(group),
		first.name, last.name, acquisition.ShapeText(leading))
	return out, nil
}

// sortByNumbers orders names that differ in their numbers.
func sortByNumbers(group []fileArrays) {
	slices.SortStableFunc(group, func(a, b fileArrays) int {
		_, left := numbersIn(a.name)
		_, right := numbersIn(b.name)
		return cmp.Or(slices.Compare(left, right), strings.Compare(a.name, b.name))
	})
}

// joinOne stacks what differs from file to file.
func joinOne(name string, leading []int, same []acquisition.Array) (acquisition.Array, error) {
	constant := same[0].Len() == 1 || rising(same[0])
	for _, a := range same {
		constant = constant && a.Type == same[0].Type && string(a.Raw()) == string(same[0].Raw())
	}
	if constant {
		one := same[0]
		one.Name = name
		return one, nil
	}
	return acquisition.Stack(name, leading, same)
}

// rising tells whether the values are a list that only rises, as a time axis does.
func rising(a acquisition.Array) bool {
	v, err := a.Float64s()
	if err != nil || len(v) < 2 {
		return false
	}
	for i := range v[1:] {
		if !(v[i+1] > v[i]) {
			return false
		}
	}
	return true
}

// leadingAxes returns the lengths of the axes along which a sorted series is stacked: one for each number that runs when
// they run through every combination, else one for all files.
func leadingAxes(group []fileArrays) []int {
	var leading []int
	product := 1
	_, first := numbersIn(group[0].name)
	for axis := range first {
		seen := map[int]bool{}
		for _, f := range group {
			_, numbers := numbersIn(f.name)
			seen[numbers[axis]] = true
		}
		if len(seen) > 1 {
			leading = append(leading, len(seen))
			product *= len(seen)
		}
		if product > len(group) {
			break
		}
	}
	if product != len(group) {
		return []int{len(group)}
	}
	return leading
}

// seriesName returns the name of a series: that of its first file with # for the numbers that run.
func seriesName(group []fileArrays) string {
	pattern, first := numbersIn(group[0].name)
	for axis := range first {
		runs := false
		for _, f := range group {
			_, numbers := numbersIn(f.name)
			runs = runs || numbers[axis] != first[axis]
		}
		mark := "\x00"
		if !runs {
			mark = strconv.Itoa(first[axis])
		}
		pattern = strings.Replace(pattern, "#", mark, 1)
	}
	return strings.ReplaceAll(pattern, "\x00", "#")
}

func stem(name string) string {
	base := path.Base(name)
	return strings.TrimSuffix(base, path.Ext(base))
}

func namesOf(arrays []acquisition.Array) string {
	var names []string
	for _, a := range arrays[:min(len(arrays), 10)] {
		names = append(names, a.Name)
	}
	return strconv.Quote(strings.Join(names, ", "))
}

// named returns all arrays; names that stand in several files get the name of their file before them.
func named(read []fileArrays) (out []acquisition.Array) {
	count := map[string]int{}
	for _, f := range read {
		for _, a := range f.arrays {
			count[a.Name]++
		}
	}
	for _, f := range read {
		for _, a := range f.arrays {
			if count[a.Name] > 1 {
				a.Name = strings.TrimSuffix(f.name, path.Ext(f.name)) + "/" + a.Name
			}
			out = append(out, a)
		}
	}
	return out
}
