package quality

import (
	"math"
	"slices"
	"sort"

	"gonum.org/v1/gonum/mat"
)

// neighbour is a shot near another in direction; sign is -1 when it looks the opposite way, and its projection is
// mirrored.
type neighbour struct {
	at     int
	sign   float64
	cosine float64
}

// neighbours returns the shots nearest to shot i in direction among those allowed, as axes, nearest first.
func (s *Subject) neighbours(i, count int, allowed func(int) bool) []neighbour {
	near := make([]neighbour, 0, count+1)
	for j, n := range s.direction {
		if j == i || !allowed(j) {
			continue
		}
		m := s.direction[i]
		c := n[0]*m[0] + n[1]*m[1] + n[2]*m[2]
		one := neighbour{j, math.Copysign(1, c), math.Abs(c)}
		if len(near) == count && one.cosine <= near[count-1].cosine {
			continue
		}
		at := sort.Search(len(near), func(k int) bool { return near[k].cosine < one.cosine })
		near = append(near, neighbour{})
		copy(near[at+1:], near[at:])
		near[at] = one
		near = near[:min(len(near), count)]
	}
	return near
}

// neighbourCount is enough to fit a plane in 3D, or a straight line in 2D, with some to spare.
func (s *Subject) neighbourCount() int { return 4 * (s.A.Dim - 1) }

// at returns the profile of shot j at a position of shot i's grid, seen along sign times its direction, its strength
// made 1. Grids differ only where gradient strengths do.
func (s *Subject) at(j int, sign float64, mm float64) float64 {
	x := sign*mm/s.V.StepMM[j] + float64(s.V.Reach[j])
	low := int(math.Floor(x))
	if low < 0 || low+1 >= len(s.profile[j]) {
		if low+1 == len(s.profile[j]) && x == float64(low) {
			return s.profile[j][low] / s.V.Strength[j]
		}
		return 0
	}
	f := x - float64(low)
	return (s.profile[j][low]*(1-f) + s.profile[j][low+1]*f) / s.V.Strength[j]
}

// predictionWeights returns how the neighbours combine to the projection of shot i: the value in the middle of the plane
// (3D) or line (2D) fitted through them over direction.
func (s *Subject) predictionWeights(i int, near []neighbour) []float64 {
	e1, e2 := tangents(s.direction[i])
	rows := mat.NewDense(len(near), s.A.Dim, nil)
	for k, n := range near {
		v := s.direction[n.at]
		rows.Set(k, 0, 1)
		rows.Set(k, 1, n.sign*(v[0]*e1[0]+v[1]*e1[1]+v[2]*e1[2]))
		if s.A.Dim == 3 {
			rows.Set(k, 2, n.sign*(v[0]*e2[0]+v[1]*e2[1]+v[2]*e2[2]))
		}
	}
	var normal, inverse mat.Dense
	normal.Mul(rows.T(), rows)
	for c := range s.A.Dim {
		normal.Set(c, c, normal.At(c, c)+1e-9)
	}
	w := make([]float64, len(near))
	if err := inverse.Inverse(&normal); err != nil && inverse.IsEmpty() {
		return w
	}
	for k := range near {
		for c := range s.A.Dim {
			w[k] += inverse.At(0, c) * rows.At(k, c)
		}
	}
	return w
}

// tangents returns two unit vectors at right angles to n and each other; the first lies in the x-y plane.
func tangents(n [3]float64) (e1, e2 [3]float64) {
	e1 = [3]float64{-n[1], n[0], 0}
	if l := math.Hypot(n[0], n[1]); l > 1e-9 {
		e1[0], e1[1] = e1[0]/l, e1[1]/l
	} else {
		e1 = [3]float64{1, 0, 0}
	}
	e2 = [3]float64{n[1]*e1[2] - n[2]*e1[1], n[2]*e1[0] - n[0]*e1[2], n[0]*e1[1] - n[1]*e1[0]}
	return e1, e2
}

// misfitOf returns the distance of shot i from what its neighbours predict, root of the summed squares, over the size of
// its own projection.
func (s *Subject) misfitOf(i int, near []neighbour, weights []float64) float64 {
	var off, own float64
	for x, p := range s.profile[i] {
		mm := float64(x-s.V.Reach[i]) * s.V.StepMM[i]
		p /= s.V.Strength[i]
		r := p
		for k, n := range near {
			r -= weights[k] * s.at(n.at, n.sign, mm)
		}
		off, own = off+r*r, own+p*p
	}
	return math.Sqrt(off / math.Max(own, math.SmallestNonzeroFloat64))
}

// pairMisfit is misfitOf against one other shot.
func (s *Subject) pairMisfit(i int, other neighbour) float64 {
	return s.misfitOf(i, []neighbour{other}, []float64{1})
}

const (
	foreignTimes = 4    // the misfit of the surroundings
	foreignFloor = 0.08 // of the projection
)

// robustMisfit returns the least misfit of shot i when any one of its neighbours is left out, so that a shot is not blamed
// for one bad neighbour.
func (s *Subject) robustMisfit(i int, near []neighbour) float64 {
	least := math.Inf(1)
	for k := range near {
		others := append(append([]neighbour{}, near[:k]...), near[k+1:]...)
		least = math.Min(least, s.misfitOf(i, others, s.predictionWeights(i, others)))
	}
	return least
}

// comparison compares every shot with its neighbours in direction.
type comparison struct {
	*Subject
	g          *standing
	taken      map[int]bool  // shots that are no measure for others
	near       [][]neighbour // [shot]
	suspicious float64       // misfit above which it is asked whether one bad neighbour makes it
}

// compareNeighbours finds the shots that do not belong among their neighbours in direction. The worst is taken out and its
// neighbours are compared anew, until none stands out, so that one bad shot does not drag others along.
func (s *Subject) compareNeighbours(g *standing, taken map[int]bool) {
	n := len(s.V.Shots)
	c := &comparison{Subject: s, g: g, taken: taken, near: make([][]neighbour, n), suspicious: math.Inf(1)}
	g.misfit = make([]float64, n)
	for i := range n {
		c.renew(i)
	}
	g.among, g.atRandom = median(s.misfitsKept(g, taken)), c.misfitAtRandom()
	c.forgive()
	for range n / 10 {
		worst := c.worst()
		if worst < 0 {
			return
		}
		taken[worst] = true
		g.foreign = union(g.foreign, []int{worst})
		c.renewAround(worst)
	}
}

// renew finds the neighbours of shot i among those not taken, and its misfit against them.
func (c *comparison) renew(i int) {
	c.near[i] = c.neighbours(i, c.neighbourCount(), func(j int) bool { return !c.taken[j] })
	c.g.misfit[i] = c.misfitOf(i, c.near[i], c.predictionWeights(i, c.near[i]))
	if c.g.misfit[i] > c.suspicious {
		c.g.misfit[i] = math.Min(c.g.misfit[i], c.robustMisfit(i, c.near[i]))
	}
}

// forgive compares the suspicious anew, without the worst neighbour of each.
func (c *comparison) forgive() {
	c.suspicious = math.Max(2*c.g.among, foreignFloor/2)
	for i, m := range c.g.misfit {
		if m > c.suspicious {
			c.renew(i)
		}
	}
}

// worst returns the shot that stands out most from its surroundings, -1 when none does.
func (c *comparison) worst() int {
	worst, limit := -1, 1.0
	for i, m := range c.g.misfit {
		if c.taken[i] {
			continue
		}
		around := c.g.among
		if len(c.near[i]) > 0 {
			around = math.Max(around, c.misfitAround(c.g, c.near[i]))
		}
		if ratio := m / math.Max(foreignTimes*around, foreignFloor); ratio > limit {
			worst, limit = i, ratio
		}
	}
	return worst
}

// renewAround compares anew the shots that had a shot among their neighbours.
func (c *comparison) renewAround(shot int) {
	for i := range c.near {
		if slices.ContainsFunc(c.near[i], func(k neighbour) bool { return k.at == shot }) {
			c.renew(i)
		}
	}
}

func (s *Subject) misfitsKept(g *standing, taken map[int]bool) []float64 {
	var out []float64
	for i, m := range g.misfit {
		if !taken[i] {
			out = append(out, m)
		}
	}
	return out
}

// misfitAround returns the median misfit of a shot's neighbours. A neighbour that has the shot itself among its own is
// the worse for it; the lower quartile forgives half of them.
func (s *Subject) misfitAround(g *standing, near []neighbour) float64 {
	var values []float64
	for _, n := range near {
		values = append(values, g.misfit[n.at])
	}
	return quantile(values, 0.25)
}

// misfitAtRandom returns the median misfit of shots against strangers: as many as there are neighbours, spread over the
// acquisition, combined by the same weights. Averages over several shots are compared with averages over as many, else the
// averaging alone would make neighbours look more alike.
func (c *comparison) misfitAtRandom() float64 {
	var values []float64
	n := len(c.V.Shots)
	for i := range n {
		if c.taken[i] || len(c.near[i]) == 0 {
			continue
		}
		strangers := make([]neighbour, 0, len(c.near[i]))
		for k := 1; k < n && len(strangers) < len(c.near[i]); k++ {
			j := (i + k*strangerStep) % n
			if j == i || c.taken[j] || slices.ContainsFunc(c.near[i], func(o neighbour) bool { return o.at == j }) {
				continue
			}
			strangers = append(strangers, neighbour{at: j, sign: c.signOf(i, j)})
		}
		if len(strangers) == len(c.near[i]) {
			values = append(values, c.misfitOf(i, strangers, c.predictionWeights(i, c.near[i])))
		}
	}
	if len(values) == 0 {
		return 0
	}
	return median(values)
}

// strangerStep is a prime beyond any period that an order of directions is likely to have.
const strangerStep = 10007

// signOf returns -1 when shot j looks against shot i.
func (s *Subject) signOf(i, j int) float64 {
	a, b := s.direction[i], s.direction[j]
	return math.Copysign(1, a[0]*b[0]+a[1]*b[1]+a[2]*b[2])
}

var directionChecks = []Check{
	{Name: "neighbours", Label: "shots against neighbours in direction", Needs: []Need{spokes, enoughShots},
		Rule:   "a projection differs from what its neighbours in direction predict by less than 8 % or four times what is usual there",
		Source: "own rule; projections change smoothly with direction",
		Advice: "leave these shots out, or correct their gradients: two rows may have changed places", Run: foreignShots},
	{Name: "gradient-order", Label: "gradients belong to their shots", Needs: []Need{spokes, enoughShots},
		Rule:   "what neighbours in direction predict is off by less than 45 % of what as many shots taken at random predict, unless all are alike",
		Source: "own rule; projections change smoothly with direction",
		Advice: "check the order of gradient_mT_per_m against the order of the shots", Run: gradientOrder},
	{Name: "same-direction", Label: "repeated directions", Needs: []Need{spokes},
		Rule: "shots along the same gradient agree within noise or 5 %", Source: "a measurement repeats itself",
		Advice: "one of the rows of gradient_mT_per_m may be a copy; correct it or leave the shots out", Run: sameDirection},
	{Name: "opposite-direction", Label: "opposite directions", Needs: []Need{spokes},
		Rule: "shots along opposite gradients give mirrored projections within noise or 5 %", Source: "p(x, -n) = p(-x, n) for every object",
		Advice: "look for a frequency offset, a wrong time zero or an unequal gradient of both signs", Run: oppositeDirection},
}

func enoughShots(s *Subject) bool { return len(s.V.Shots) > 3*s.neighbourCount() }

func foreignShots(s *Subject) []Finding {
	at := s.standing.foreign
	if len(at) == 0 {
		return []Finding{found(Fine, 100*s.standing.among, "%", "projections differ from what their neighbours predict by %.2g %%", 100*s.standing.among)}
	}
	worst := quantile(pick(s.standing.misfit, at), 1)
	return []Finding{found(s.gravity(at), 100*worst, "%", "%s %s not like the neighbours in direction, by up to %.0f %% (usual: %.2g %%)",
		counted(at, "shot"), are(at), 100*worst, 100*s.standing.among).excluding(s.shots(at))}
}

// alikeShare is the misfit among neighbours over that among strangers above which an order of gradients is not believed.
// Of sound acquisitions with tellingTimes more structure than noise it stays below 0.4, down to 14 directions in 2D and 26
// in 3D; gradients dealt out at random give 0.5 to 1.8.
const (
	alikeShare   = 0.45
	tellingTimes = 4    // of the noise of a profile
	tellingFloor = 0.02 // of a profile
)

func gradientOrder(s *Subject) []Finding {
	g := s.standing
	// Noise alone makes neighbours and strangers differ alike, and so does a body that looks the same from everywhere.
	telling := g.atRandom > tellingFloor && g.atRandom > tellingTimes*s.profileNoise()
	ratio := g.among / math.Max(g.atRandom, math.SmallestNonzeroFloat64)
	if !telling {
		return []Finding{found(Fine, ratio, "", "the object looks nearly the same from all directions; the order of the gradients cannot be told")}
	}
	level := Fine
	if ratio > alikeShare {
		level = Stop
	}
	return []Finding{found(level, ratio, "", "neighbours in direction differ by %.2g %%, as many shots taken at random by %.2g %%", 100*g.among, 100*g.atRandom)}
}

// profileNoise returns the noise of a profile over its size, median over the shots.
func (s *Subject) profileNoise() float64 {
	var out []float64
	for i, p := range s.profile {
		size := 0.0
		for _, v := range p {
			size += v * v
		}
		out = append(out, s.noise[i]*math.Sqrt(float64(len(p))/math.Max(size, math.SmallestNonzeroFloat64)))
	}
	return median(out)
}

// sameTurn is the cosine of half a degree, within which two directions count as one.
const sameTurn = 0.99996

func sameDirection(s *Subject) []Finding     { return s.pairs(1, "the same direction") }
func oppositeDirection(s *Subject) []Finding { return s.pairs(-1, "opposite directions") }

// pairs compares the shots whose directions are the same (sign 1) or opposite (sign -1).
func (s *Subject) pairs(sign float64, words string) []Finding {
	var misfits []float64
	var bad []int
	limit := math.Max(0.05, 5*s.profileNoise())
	sound := s.notIn(union(union(s.standing.silent, s.standing.loud), s.standing.turned))
	for a, i := range sound {
		for _, j := range sound[a+1:] {
			n, m := s.direction[i], s.direction[j]
			if sign*(n[0]*m[0]+n[1]*m[1]+n[2]*m[2]) < sameTurn {
				continue
			}
			misfit := s.pairMisfit(i, neighbour{j, sign, 1})
			misfits = append(misfits, misfit)
			if misfit > limit {
				bad = union(bad, []int{i, j})
			}
		}
	}
	if len(misfits) == 0 {
		return []Finding{found(Fine, 0, "%", "no two shots have %s", words)}
	}
	middle := median(misfits)
	f := doubtIf(len(bad) > 0, 100*middle, "%", "%s of shots with %s differ by %.2g %%", counted(make([]int, len(misfits)), "pair"), words, 100*middle)
	if len(bad) > 0 {
		f.Text += "; too much for " + counted(bad, "shot")
	}
	return []Finding{f.onShots(s.shots(bad))}
}
