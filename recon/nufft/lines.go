package nufft

import "torrloom/recon/fft"

// lines is a bundle of lines of one length that are transformed together, [row][line] of complex numbers.
type lines[F Float] interface {
	// start empties the bundle and sets the number of lines.
	start(count int)
	// put copies pairs into a row, from line at onwards; add adds them. Both remember whether any was not zero.
	put(row, at int, pairs []F)
	add(row, at int, pairs []F)
	// transform replaces every line by Σ_j x_j exp(-i2πjk/length); false when all were zero and stay so.
	transform() bool
	// multiply multiplies a row by real factors, one for every lanes neighbouring lines.
	multiply(row int, factors []F, lanes int)
	// take copies a row, from line at onwards, into pairs, scaled.
	take(row, at int, pairs []F, scale F)
}

func newLines[F Float](length, most int) lines[F] {
	// The lengths are even and smooth or 1: always valid.
	if _, single := any(F(0)).(float32); single {
		plan, _ := fft.NewPlan[complex64](length)
		b := &bundle[float32, complex64]{plan: plan, pack: pack32, packMore: packMore32, unpack: unpack32, scale: scale32}
		b.room(length * most)
		return any(b).(lines[F])
	}
	plan, _ := fft.NewPlan[complex128](length)
	b := &bundle[float64, complex128]{plan: plan, pack: pack64, packMore: packMore64, unpack: unpack64, scale: scale64}
	b.room(length * most)
	return any(b).(lines[F])
}

// bundle is lines of complex numbers C made of pairs of F.
type bundle[F Float, C fft.Complex] struct {
	plan          *fft.Plan[C]
	data, scratch []C
	count         int
	filled        bool
	pack          func(to []C, pairs []F)
	packMore      func(to []C, pairs []F)
	unpack        func(pairs []F, from []C, scale F)
	scale         func(row []C, factor F)
}

func (b *bundle[F, C]) room(n int) { b.data, b.scratch = make([]C, n), make([]C, n) }

func (b *bundle[F, C]) start(count int) {
	b.count, b.filled = count, false
	clear(b.data[:b.plan.Len()*count])
}

func (b *bundle[F, C]) put(row, at int, pairs []F) {
	b.notice(pairs)
	from := row*b.count + at
	b.pack(b.data[from:from+len(pairs)/2], pairs)
}

func (b *bundle[F, C]) add(row, at int, pairs []F) {
	b.notice(pairs)
	from := row*b.count + at
	b.packMore(b.data[from:from+len(pairs)/2], pairs)
}

// notice remembers whether any of pairs is not zero. Points fill a ball, and skipping the empty corners of its cube saves
// a fifth of the transforms.
func (b *bundle[F, C]) notice(pairs []F) {
	for i := 0; !b.filled && i < len(pairs); i++ {
		b.filled = pairs[i] != 0
	}
}

func (b *bundle[F, C]) transform() bool {
	if b.filled {
		b.plan.Forward(b.data, b.scratch, b.count)
	}
	return b.filled
}

func (b *bundle[F, C]) multiply(row int, factors []F, lanes int) {
	for i, f := range factors {
		from := row*b.count + i*lanes
		b.scale(b.data[from:from+lanes], f)
	}
}

func (b *bundle[F, C]) take(row, at int, pairs []F, scale F) {
	from := row*b.count + at
	b.unpack(pairs, b.data[from:from+len(pairs)/2], scale)
}

func pack32(to []complex64, pairs []float32) {
	for i := range to {
		to[i] = complex(pairs[2*i], pairs[2*i+1])
	}
}

func packMore32(to []complex64, pairs []float32) {
	for i := range to {
		to[i] += complex(pairs[2*i], pairs[2*i+1])
	}
}

func unpack32(pairs []float32, from []complex64, scale float32) {
	for i, v := range from {
		pairs[2*i], pairs[2*i+1] = real(v)*scale, imag(v)*scale
	}
}

func pack64(to []complex128, pairs []float64) {
	for i := range to {
		to[i] = complex(pairs[2*i], pairs[2*i+1])
	}
}

func packMore64(to []complex128, pairs []float64) {
	for i := range to {
		to[i] += complex(pairs[2*i], pairs[2*i+1])
	}
}

func unpack64(pairs []float64, from []complex128, scale float64) {
	for i, v := range from {
		pairs[2*i], pairs[2*i+1] = real(v)*scale, imag(v)*scale
	}
}

func scale32(row []complex64, factor float32) {
	for i, v := range row {
		row[i] = complex(real(v)*factor, imag(v)*factor)
	}
}

func scale64(row []complex128, factor float64) {
	for i, v := range row {
		row[i] = complex(real(v)*factor, imag(v)*factor)
	}
}
