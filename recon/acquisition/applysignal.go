package acquisition

import (
	"slices"
	"strings"

	"torrloom/recon/fault"
)

// signal makes the [delay, shot, sample] array of the signal. For a signal that was cut short it returns what is left of
// which axis.
func (w *workshop) signal() (*axisCut, error) {
	source := w.mapping.Signal
	if source.Array == "" {
		return nil, fault.New(fault.BadSetting, "", "no array chosen")
	}
	a, err := w.array(source.Array)
	if err != nil {
		return nil, err
	}
	domain, err := w.domain()
	if err != nil {
		return nil, err
	}
	axes, err := w.axes(a, source.Axes)
	if err != nil {
		return nil, err
	}
	values, err := w.parts(a, source)
	if err != nil {
		return nil, err
	}
	out, shape := arranged(values, axes)
	switch {
	case source.Conjugate:
		for i, v := range out {
			out[i] = complex(real(v), -imag(v))
		}
	case domain != Projection && !a.isComplex() && source.Imaginary == "" && axisOf(axes, "part") < 0:
		return nil, fault.New(fault.BadFile, a.Name,
			"%s found; traces need an imaginary part: another array, an axis of 2, or domain \"projection\" for real projections", a.Type)
	case domain == Projection && (a.isComplex() || source.Imaginary != "" || axisOf(axes, "part") >= 0):
		return nil, fault.New(fault.BadFile, a.Name, "projections are real; give their real part after phasing")
	}
	array, err := signalOf(domain, shape, out)
	w.members["signal"] = array
	return cutOf(a, axes), err
}

func (w *workshop) domain() (Domain, error) {
	a, there := w.members["domain"]
	if !there {
		return Time, nil
	}
	texts, err := a.Strings()
	if err != nil || len(texts) != 1 {
		return "", fault.New(fault.BadFile, "domain", "a single text wanted")
	}
	return Domain(texts[0]), nil
}

func signalOf(domain Domain, shape []int, values []complex64) (Array, error) {
	if domain != Projection {
		return ArrayOf("signal", shape, values)
	}
	reals := make([]float32, len(values))
	for i, v := range values {
		reals[i] = real(v)
	}
	return ArrayOf("signal", shape, reals)
}

// axis is one axis of the signal after those that hold several were taken apart.
type axis struct {
	word   string
	length int
	from   int // the axis of the array it was part of
}

func axisOf(axes []axis, word string) int {
	return slices.IndexFunc(axes, func(x axis) bool { return x.word == word })
}

// axes returns the axes of the signal, slowest first.
func (w *workshop) axes(a Array, words []string) ([]axis, error) {
	if len(words) != len(a.Shape) {
		return nil, fault.New(fault.BadSetting, a.Name, "%d axes named, shape %s has %d", len(words),
			ShapeText(a.Shape), len(a.Shape))
	}
	var out []axis
	for i, text := range words {
		held := strings.Fields(text)
		lengths, err := w.lengths(a, held, a.Shape[i])
		if err != nil {
			return nil, err
		}
		for k, word := range held {
			out = append(out, axis{word, lengths[k], i})
		}
	}
	for _, x := range out {
		if x.word == "one" && x.length != 1 || x.word == "part" && x.length != 2 {
			return nil, fault.New(fault.BadFile, a.Name, "an axis of length %d named %q in shape %s", x.length, x.word,
				ShapeText(a.Shape))
		}
	}
	if axisOf(out, "sample") < 0 || axisOf(out, "shot") < 0 {
		return nil, fault.New(fault.BadSetting, a.Name, "axes %q; one is the shot and one the sample", words)
	}
	return out, nil
}

// lengths parts the length of an axis among what it holds. All but one must be known from elsewhere.
func (w *workshop) lengths(a Array, held []string, n int) ([]int, error) {
	out := make([]int, len(held))
	left, unknown := n, -1
	for k, word := range held {
		known := map[string]int{"part": 2, "one": 1, "delay": w.members["delay_us"].Len(),
			"shot": rowsOf(w.members["gradient_mT_per_m"])}[word]
		if known == 0 || len(held) == 1 {
			if unknown >= 0 {
				return nil, fault.New(fault.BadSetting, a.Name,
					"an axis of %d holds %q; how many of one is not known from another field", n, strings.Join(held, " "))
			}
			unknown = k
			continue
		}
		if left%known != 0 {
			return nil, fault.New(fault.BadFile, a.Name, "an axis of %d holds %q, but %d is no multiple of %d (%s)", n,
				strings.Join(held, " "), left, known, word)
		}
		out[k], left = known, left/known
	}
	if unknown >= 0 {
		out[unknown] = left
	} else if left != 1 {
		return nil, fault.New(fault.BadFile, a.Name, "an axis of %d holds %q, which make %d", n,
			strings.Join(held, " "), n/left)
	}
	return out, nil
}

func rowsOf(a Array) int {
	if len(a.Shape) == 0 {
		return 0
	}
	return a.Shape[0]
}

// parts returns the values of the signal as complex numbers in the order of its array.
func (w *workshop) parts(a Array, source SignalSource) ([]complex64, error) {
	values, err := a.Complex64s()
	if err != nil || source.Imaginary == "" {
		return values, err
	}
	if a.isComplex() {
		return nil, fault.New(fault.BadFile, a.Name, "%s found beside an array of imaginary parts; real parts wanted",
			a.Type)
	}
	b, err := w.array(source.Imaginary)
	if err != nil {
		return nil, err
	}
	if !slices.Equal(a.Shape, b.Shape) || b.isComplex() {
		return nil, fault.New(fault.BadFile, b.Name,
			"%s of shape %s for the imaginary parts, the real ones have shape %s", b.Type, ShapeText(b.Shape), ShapeText(a.Shape))
	}
	imaginary, err := b.Complex64s()
	if err != nil {
		return nil, err
	}
	for i := range values {
		values[i] = complex(real(values[i]), real(imaginary[i]))
	}
	return values, nil
}

// arranged returns the values as [delay, shot, sample].
func arranged(values []complex64, axes []axis) ([]complex64, []int) {
	stride := make([]int, len(axes))
	for k, step := len(axes)-1, 1; k >= 0; k-- {
		stride[k] = step
		step *= axes[k].length
	}
	length, step := map[string]int{"delay": 1, "shot": 1, "sample": 1}, map[string]int{}
	for k, x := range axes {
		length[x.word], step[x.word] = x.length, stride[k]
	}
	shape := []int{length["delay"], length["shot"], length["sample"]}
	out := make([]complex64, 0, shape[0]*shape[1]*shape[2])
	for d := range shape[0] {
		for s := range shape[1] {
			at := d*step["delay"] + s*step["shot"]
			for j := range shape[2] {
				v := values[at+j*step["sample"]]
				if apart := step["part"]; apart > 0 {
					v = complex(real(v), real(values[at+j*step["sample"]+apart]))
				}
				out = append(out, v)
			}
		}
	}
	return out, shape
}
