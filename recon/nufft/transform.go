package nufft

// The transforms go axis by axis and in place: z and y first for an adjoint, x last. Along an axis, voxel i of n belongs
// to the output i - floor(n/2) of the transform, modulo its length; outputs that are no voxel are not kept, and inputs
// that are no voxel are zero. What an adjoint keeps goes to the front of the axis, where a forward finds it.

// output returns the row of voxel i in a transform with exp(-i2π…).
func (a *axis) output(i int) int { return (i - a.n/2 + a.length) % a.length }

// mirrored returns the row of voxel i in a transform with exp(+i2π…), made by one with exp(-i2π…).
func (a *axis) mirrored(i int) int { return (a.n/2 - i + a.length) % a.length }

// Image puts the image of what was spread into image, [voxel][lane], and leaves the grid spent; Reset it before the next
// sum. Progress, if not nil, is called with the fraction done.
func (g *Grid[F]) Image(image []F, progress func(float64)) {
	x, y, z := &g.plan.axes[0], &g.plan.axes[1], &g.plan.axes[2]
	report := steps(progress, y.length+2*z.n)
	for iy := range y.length {
		if z.n > 1 {
			g.shrink(2, iy)
		}
		report()
	}
	for iz := range z.n {
		if y.n > 1 {
			g.shrink(1, iz)
		}
		report()
	}
	for iz := range z.n {
		for iy := 0; iy < y.n; iy += g.columns() {
			g.shrinkRows(image, iz, iy, min(iy+g.columns(), y.n), x)
		}
		report()
	}
}

// Load makes the grid of an image, [voxel][lane], ready to interpolate. Progress, if not nil, is called with the fraction
// done.
func (g *Grid[F]) Load(image []F, progress func(float64)) {
	x, y, z := &g.plan.axes[0], &g.plan.axes[1], &g.plan.axes[2]
	report := steps(progress, y.length+2*z.n)
	for iz := range z.n {
		for iy := 0; iy < y.n; iy += g.columns() {
			g.growRows(image, iz, iy, min(iy+g.columns(), y.n), x)
		}
		report()
	}
	for iz := range z.n {
		if y.n > 1 {
			g.grow(1, iz)
		}
		report()
	}
	for iy := range y.length {
		if z.n > 1 {
			g.grow(2, iy)
		}
		report()
	}
}

// steps returns a function to call after each of so many equal steps.
func steps(progress func(float64), total int) func() {
	done := 0
	return func() {
		done++
		if progress != nil {
			progress(float64(done) / float64(total))
		}
	}
}

// shrink transforms all columns along y (axis 1) in plane other, or along z (axis 2) at row other, from cells to voxels.
func (g *Grid[F]) shrink(along, other int) {
	a, bundle := &g.plan.axes[along], g.bundle[along]
	g.eachBlock(func(from, to int) {
		bundle.start((to - from) / 2)
		for cell := range a.length {
			bundle.put(cell, 0, g.cellsAt(along, cell, other, from, to))
		}
		filled := bundle.transform()
		for i := range a.n {
			out := g.cellsAt(along, i, other, from, to)
			if filled {
				bundle.take(a.mirrored(i), 0, out, F(a.correction[i]))
			} else {
				clear(out)
			}
		}
	})
}

// grow transforms the same columns from voxels to cells.
func (g *Grid[F]) grow(along, other int) {
	a, bundle := &g.plan.axes[along], g.bundle[along]
	g.eachBlock(func(from, to int) {
		bundle.start((to - from) / 2)
		for i := range a.n {
			in := g.cellsAt(along, i, other, from, to)
			for j := range in {
				in[j] *= F(a.correction[i])
			}
			bundle.put(a.output(i), 0, in)
		}
		bundle.transform()
		for cell := range a.length {
			bundle.take(cell, 0, g.cellsAt(along, cell, other, from, to), 1)
		}
	})
}

// eachBlock cuts a row of cells into blocks of columns and calls f with their range of numbers.
func (g *Grid[F]) eachBlock(f func(from, to int)) {
	size, all := g.columns()*2*g.lanes, g.plan.rowCells()*2*g.lanes
	for from := 0; from < all; from += size {
		f(from, min(from+size, all))
	}
}

// cellsAt returns the numbers from..to-1 of the row of cells at place cell along an axis and other along the other one.
func (g *Grid[F]) cellsAt(along, cell, other, from, to int) []F {
	y, z := cell, other
	if along == 2 {
		y, z = other, cell
	}
	row := (z*g.plan.axes[1].length + y) * g.plan.rowCells() * 2 * g.lanes
	return g.cells[row+from : row+to]
}

// shrinkRows transforms the rows fromY..toY-1 of plane iz along x into the image. Cells past the period are folded back.
func (g *Grid[F]) shrinkRows(image []F, iz, fromY, toY int, x *axis) {
	pairs := 2 * g.lanes
	if x.n == 1 {
		for iy := fromY; iy < toY; iy++ {
			copy(image[(iz*g.plan.axes[1].n+iy)*pairs:][:pairs], g.cellsAt(1, iy, iz, 0, pairs))
		}
		return
	}
	bundle := g.bundle[0]
	bundle.start((toY - fromY) * g.lanes)
	for iy := fromY; iy < toY; iy++ {
		row := g.cellsAt(1, iy, iz, 0, g.plan.rowCells()*pairs)
		for cell := range g.plan.rowCells() {
			bundle.add(cell%x.length, (iy-fromY)*g.lanes, row[cell*pairs:(cell+1)*pairs])
		}
	}
	bundle.transform()
	for iy := fromY; iy < toY; iy++ {
		row := image[(iz*g.plan.axes[1].n+iy)*x.n*pairs:]
		for ix := range x.n {
			bundle.take(x.mirrored(ix), (iy-fromY)*g.lanes, row[ix*pairs:(ix+1)*pairs], F(x.correction[ix]))
		}
	}
}

// growRows transforms the rows fromY..toY-1 of plane iz of the image along x into cells. Cells past the period repeat
// those at its start.
func (g *Grid[F]) growRows(image []F, iz, fromY, toY int, x *axis) {
	pairs := 2 * g.lanes
	if x.n == 1 {
		for iy := fromY; iy < toY; iy++ {
			copy(g.cellsAt(1, iy, iz, 0, pairs), image[(iz*g.plan.axes[1].n+iy)*pairs:][:pairs])
		}
		return
	}
	bundle, scaled := g.bundle[0], make([]F, pairs)
	bundle.start((toY - fromY) * g.lanes)
	for iy := fromY; iy < toY; iy++ {
		row := image[(iz*g.plan.axes[1].n+iy)*x.n*pairs:]
		for ix := range x.n {
			for l, v := range row[ix*pairs : (ix+1)*pairs] {
				scaled[l] = v * F(x.correction[ix])
			}
			bundle.put(x.output(ix), (iy-fromY)*g.lanes, scaled)
		}
	}
	bundle.transform()
	for iy := fromY; iy < toY; iy++ {
		row := g.cellsAt(1, iy, iz, 0, g.plan.rowCells()*pairs)
		for cell := range g.plan.rowCells() {
			bundle.take(cell%x.length, (iy-fromY)*g.lanes, row[cell*pairs:(cell+1)*pairs], 1)
		}
	}
}
