package nufft

import (
	"math"

	"torrloom/recon/fault"
)

// Grid is the working memory of one sum: the fine periodic grid of some lanes. One goroutine uses it at a time.
//
// For an adjoint: Spread any number of times, then Image. For a forward: Load, then Interpolate any number of times. The
// split lets a caller report progress and keep its calls short.
type Grid[F Float] struct {
	plan   *Plan[F]
	lanes  int
	cells  []F         // [z][y][x][lane] pairs
	wrap   [2][]int    // for y and z: where the cells 0..length+width-1 are stored
	bundle [3]lines[F] // per axis
	row    []F         // one point's share of a row of cells
	pairs  []F         // one point's values
	place  place
}

// place is where one point touches the grid.
type place struct {
	first  [3]int
	weight [3][MaxWidth]float64
}

// bundled is how many lines are transformed together: enough to spread the cost of a loop, few enough for the cache.
const bundled = 24

// NewGrid returns an empty grid.
func (p *Plan[F]) NewGrid(lanes int) *Grid[F] { return p.newGrid(lanes, p.axes[2].length) }

// newGrid returns a grid that stores so many planes along z.
func (p *Plan[F]) newGrid(lanes, planes int) *Grid[F] {
	g := &Grid[F]{plan: p, lanes: lanes, cells: make([]F, planes*p.axes[1].length*p.rowCells()*2*lanes)}
	g.row, g.pairs = make([]F, p.axes[0].width*2*lanes), make([]F, 2*lanes)
	for i := range g.wrap {
		a := &p.axes[i+1]
		for cell := range a.length + a.width {
			g.wrap[i] = append(g.wrap[i], cell%a.length)
		}
	}
	for i := range g.bundle {
		g.bundle[i] = newLines[F](p.axes[i].length, g.columns()*lanes)
	}
	return g
}

// columns returns how many neighbouring columns of cells are transformed together.
func (g *Grid[F]) columns() int { return max(1, bundled/g.lanes) }

// Reset empties the grid for the next sum.
func (g *Grid[F]) Reset() { clear(g.cells) }

// Spread adds values, [point][lane], at points to the grid.
//
// Errors: bad-setting when a point is not finite or values does not hold lanes pairs per point.
func (g *Grid[F]) Spread(points [][3]float64, values []F) error {
	if err := g.check(points, values, 2*g.lanes); err != nil {
		return err
	}
	pairs := 2 * g.lanes
	for j := range points {
		g.locate(&points[j])
		g.weighRow(values[j*pairs : (j+1)*pairs])
		g.addRows()
	}
	return nil
}

// SpreadReal adds values of real images at points, and their mirrors, the complex conjugates at -k. Two real images share
// a lane, one as its real and one as its imaginary part, so that values is [point][image] with 2·lanes images, in pairs.
// The origin is its own mirror and counts twice.
//
// Errors: those of Spread.
func (g *Grid[F]) SpreadReal(points [][3]float64, values []F) error {
	if err := g.check(points, values, 4*g.lanes); err != nil {
		return err
	}
	for j, k := range points {
		images := values[j*4*g.lanes : (j+1)*4*g.lanes]
		for _, sign := range [2]F{1, -1} {
			g.locate(&[3]float64{float64(sign) * k[0], float64(sign) * k[1], float64(sign) * k[2]})
			for l := range g.lanes { // a + ib, where a* stands at the mirror of a
				a, b := images[4*l:4*l+2], images[4*l+2:4*l+4]
				g.pairs[2*l], g.pairs[2*l+1] = a[0]-sign*b[1], sign*a[1]+b[0]
			}
			g.weighRow(g.pairs)
			g.addRows()
		}
	}
	return nil
}

// Interpolate puts the values of the loaded image at points into values, [point][lane].
//
// Errors: those of Spread.
func (g *Grid[F]) Interpolate(points [][3]float64, values []F) error {
	if err := g.check(points, values, 2*g.lanes); err != nil {
		return err
	}
	pairs := 2 * g.lanes
	for j := range points {
		g.locate(&points[j])
		g.sumRows()
		g.sumRow(values[j*pairs : (j+1)*pairs])
	}
	return nil
}

func (g *Grid[F]) check(points [][3]float64, values []F, perPoint int) error {
	if len(values) != len(points)*perPoint {
		return fault.New(fault.BadSetting, "gridding", "%d numbers for %d points in %d lanes", len(values), len(points), g.lanes)
	}
	for j, k := range points {
		if sum := k[0] + k[1] + k[2]; math.IsNaN(sum) || math.IsInf(sum, 0) {
			return fault.New(fault.BadSetting, "gridding", "point %d lies at (%g, %g, %g); finite places are needed", j, k[0], k[1], k[2])
		}
	}
	return nil
}

// locate works out which cells a point touches and how strongly. Cells are counted from the start of a period, so that
// the first is in 0..length-1.
func (g *Grid[F]) locate(k *[3]float64) {
	for i := range g.plan.axes {
		a := &g.plan.axes[i]
		if a.kernel == nil {
			g.place.first[i], g.place.weight[i][0] = 0, 1
			continue
		}
		period := float64(a.length)
		u := k[i] * a.scale
		u -= period * math.Floor(u/period)
		first := a.kernel.weigh(u, &g.place.weight[i])
		if first < 0 {
			first += a.length * ((-first + a.length - 1) / a.length)
		}
		g.place.first[i] = first
	}
}

// weighRow fills row with the values times the weights along x.
func (g *Grid[F]) weighRow(values []F) {
	row := g.row
	for ix := range g.plan.axes[0].width {
		w := F(g.place.weight[0][ix])
		part := row[ix*len(values) : (ix+1)*len(values)]
		for l, v := range values {
			part[l] = w * v
		}
	}
}

// addRows adds row to every row of cells that the point touches.
func (g *Grid[F]) addRows() {
	for iz := range g.plan.axes[2].width {
		for iy := range g.plan.axes[1].width {
			at, w := g.touched(iy, iz)
			addScaled(g.cells[at:at+len(g.row)], g.row, w)
		}
	}
}

// sumRows puts the weighted sum of the rows of cells that the point touches into row.
func (g *Grid[F]) sumRows() {
	clear(g.row)
	for iz := range g.plan.axes[2].width {
		for iy := range g.plan.axes[1].width {
			at, w := g.touched(iy, iz)
			addScaled(g.row, g.cells[at:at+len(g.row)], w)
		}
	}
}

// touched returns where in cells the row (iy, iz) of those that the point touches starts, and its weight.
func (g *Grid[F]) touched(iy, iz int) (at int, w F) {
	y, z := g.wrap[0][g.place.first[1]+iy], g.wrap[1][g.place.first[2]+iz]
	at = ((z*g.plan.axes[1].length+y)*g.plan.rowCells() + g.place.first[0]) * 2 * g.lanes
	return at, F(g.place.weight[2][iz] * g.place.weight[1][iy])
}

// addScaled adds w·from to sum. Eight at a time, because a pass of a loop costs more than a product in wasm.
func addScaled[F Float](sum, from []F, w F) {
	for len(from) >= 8 && len(sum) >= 8 {
		s, f := (*[8]F)(sum), (*[8]F)(from)
		s[0] += w * f[0]
		s[1] += w * f[1]
		s[2] += w * f[2]
		s[3] += w * f[3]
		s[4] += w * f[4]
		s[5] += w * f[5]
		s[6] += w * f[6]
		s[7] += w * f[7]
		sum, from = sum[8:], from[8:]
	}
	for i, v := range from {
		sum[i] += w * v
	}
}

// sumRow puts the sum of row, weighted along x, into values.
func (g *Grid[F]) sumRow(values []F) {
	clear(values)
	for ix := range g.plan.axes[0].width {
		w := F(g.place.weight[0][ix])
		part := g.row[ix*len(values) : (ix+1)*len(values)]
		for l, v := range part {
			values[l] += w * v
		}
	}
}
