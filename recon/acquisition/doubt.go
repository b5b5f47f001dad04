package acquisition

import (
	"fmt"
	"math"
	"slices"
)

// Doubts returns, in plain sentences, what a person should hear about an array before it is used: NaN and infinite values,
// what looks like the wrong byte order, and of traces a channel that is constant, clipped or scaled strangely. The
// channels of complex values are their real and imaginary parts.
//
// Approximate: rules of thumb, each with its bound beside it.
func Doubts(a Array) (out []string) {
	if a.isText() || a.Len() == 0 {
		return nil
	}
	if a.LooksSwapped() {
		least, most := a.Range()
		return []string{fmt.Sprintf("%s: values from %.3g to %.3g; its byte order may be wrong, check how it was written", a.Name, least, most)}
	}
	names := []string{""}
	if a.isComplex() {
		names = []string{", real part", ", imaginary part"}
	}
	channels := make([]channel, len(names))
	for c := range names {
		channels[c] = channelOf(a, c)
		for _, text := range channels[c].doubts(isTraces(a)) {
			out = append(out, a.Name+names[c]+": "+text)
		}
	}
	if len(channels) == 2 {
		if text := unequal(channels[0], channels[1]); text != "" {
			out = append(out, a.Name+": "+text)
		}
	}
	return out
}

// channel is what one pass over the values of a channel finds.
type channel struct {
	n, nan, infinite int
	least, most      float64
	atLeast, atMost  int // values that are exactly the extremes
	longLeast        int // longest run of them
	longMost         int
	squares          float64
}

// channelOf looks at the real parts (0) or the imaginary parts (1), in the order of the file.
func channelOf(a Array, part int) channel {
	number := a.layout.number()
	c := channel{least: math.Inf(1), most: math.Inf(-1)}
	size, from := a.layout.Size, part*a.layout.part()
	runLeast, runMost := 0, 0
	for at := from; at < len(a.raw); at += size {
		v := number(a.raw[at:])
		c.n++
		switch {
		case v != v:
			c.nan++
			continue
		case v-v != 0:
			c.infinite++
			continue
		}
		if v < c.least {
			c.least, c.atLeast, c.longLeast, runLeast = v, 0, 0, 0
		}
		if v > c.most {
			c.most, c.atMost, c.longMost, runMost = v, 0, 0, 0
		}
		runLeast, runMost = run(runLeast, v == c.least), run(runMost, v == c.most)
		c.atLeast, c.atMost = c.atLeast+count(v == c.least), c.atMost+count(v == c.most)
		c.longLeast, c.longMost = max(c.longLeast, runLeast), max(c.longMost, runMost)
		c.squares += v * v
	}
	return c
}

func run(length int, on bool) int {
	if on {
		return length + 1
	}
	return 0
}

// isTraces tells traces from lists and tables of gradients, which may well be constant or flat: they are complex, or have
// two axes longer than a vector.
func isTraces(a Array) bool {
	long := 0
	for _, n := range a.Shape {
		long += count(n > 3)
	}
	return a.isComplex() || long > 1
}

// doubts returns what is doubtful about one channel.
func (c channel) doubts(traces bool) (out []string) {
	if c.nan+c.infinite > 0 {
		out = append(out, fmt.Sprintf("%d values are NaN and %d infinite, of %d", c.nan, c.infinite, c.n))
	}
	const few = 64 // of so few values nothing can be told
	if !traces || c.n < few || c.nan+c.infinite == c.n {
		return out
	}
	if c.least == c.most {
		return append(out, fmt.Sprintf("all values are %g; the channel may not have been recorded", c.least))
	}
	if text := c.clipped(); text != "" {
		out = append(out, text)
	}
	// Digitisers give volts or whole numbers; beyond these bounds a scale factor was applied once too often or not at all.
	if top := math.Max(math.Abs(c.least), math.Abs(c.most)); top < 1e-15 || top > 1e15 {
		out = append(out,
			fmt.Sprintf("values from %.3g to %.3g; the scale is unusual, check the factor it was written with", c.least,
				c.most))
	}
	return out
}

// clipped tells a flat top: the extreme value repeats in a row, more often than noise or coarse steps would make it. A run
// of four equal extremes among smooth or noisy samples has no other likely cause, as long as the extreme is rare: in
// whole numbers of few steps, or in data padded with zeros, it is not.
func (c channel) clipped() string {
	const rowed = 4
	top := c.longMost >= rowed && c.most > 0
	bottom := c.longLeast >= rowed && c.least < 0
	rare := func(n int) bool { return 2*n < c.n }
	switch {
	case top && rare(c.atMost) && bottom && rare(c.atLeast):
		return fmt.Sprintf("flat at %g and at %g (%d and %d values); the receiver was clipped", c.most, c.least,
			c.atMost, c.atLeast)
	case top && rare(c.atMost):
		return fmt.Sprintf("flat at its greatest value %g (%d values, up to %d in a row); the receiver was clipped",
			c.most, c.atMost, c.longMost)
	case bottom && rare(c.atLeast):
		return fmt.Sprintf("flat at its least value %g (%d values, up to %d in a row); the receiver was clipped",
			c.least, c.atLeast, c.longLeast)
	}
	return ""
}

// unequal tells real and imaginary parts whose sizes differ ten-thousandfold. Phasing makes one part small, but leaves
// noise in it, which in a single trace is larger than that.
func unequal(re, im channel) string {
	const most = 1e4
	sizes := []float64{math.Sqrt(re.squares / float64(max(re.n, 1))), math.Sqrt(im.squares / float64(max(im.n, 1)))}
	if slices.Min(sizes) > 0 && slices.Max(sizes) > most*slices.Min(sizes) && re.n >= 64 {
		return fmt.Sprintf("the real part has a root mean square of %.3g, the imaginary part of %.3g; one may be scaled otherwise", sizes[0], sizes[1])
	}
	return ""
}
