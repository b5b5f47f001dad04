package session

import (
	"math"
	"math/cmplx"
	"slices"
	"sort"

	"torrloom/recon/acquisition"
	"torrloom/recon/condition"
	"torrloom/recon/fault"
	"torrloom/recon/forward"
	"torrloom/recon/recipe"
)

// ShotView is one shot at the reference delay as a recipe conditions it, beside its neighbours in direction and beside what
// an image would have given. All projections are given at PositionMM.
type ShotView struct {
	Shot       int         `json:"shot"`
	Delay      int         `json:"delay"`
	TimeNS     []float64   `json:"timeNS"` // from k = 0; empty for recorded projections
	Real       []float64   `json:"real"`   // phased trace
	Imag       []float64   `json:"imag"`
	PositionMM []float64   `json:"positionMM"` // empty where a projection has no meaning
	Projection []float64   `json:"projection"`
	Neighbours []Neighbour `json:"neighbours"` // kept shots nearest in direction, nearest first
	FromImage  []float64   `json:"fromImage"`  // projection of the image along the shot's direction; empty without one

	// Root of the summed squared difference over the size of the shot's own projection: from the mean of the neighbours and
	// from the image. 0 where there is nothing to compare with.
	OffNeighbours float64 `json:"offNeighbours"`
	OffImage      float64 `json:"offImage"`
}

// Neighbour is a shot near another in direction, turned round where it looks the opposite way.
type Neighbour struct {
	Shot       int       `json:"shot"`
	AngleDeg   float64   `json:"angleDeg"`
	Opposite   bool      `json:"opposite"`
	Real       []float64 `json:"real"` // the same seen from either end
	Projection []float64 `json:"projection"`
}

// neighboursShown is how many neighbours a shot is compared with: a ring around it in 3D, both sides in 2D.
func neighboursShown(dim int) int { return 2 * (dim - 1) }

// LookAt returns the view of one shot. Image, which may be nil, is that of the recipe's reference frame.
//
// Errors: bad-setting for a shot that is not there; bug for an image of another size; those of condition.Measure.
func LookAt(a *acquisition.Acquisition, r recipe.Recipe, shot int, image []float32) (*ShotView, error) {
	if shot < 0 || shot >= a.Shots {
		return nil, fault.New(fault.BadSetting, "shot", "shot %d asked for; there are 0 to %d", shot, a.Shots-1)
	}
	l := &looker{a: a, r: r, delay: r.Conditioning.ReferenceDelay(a), c: &condition.Constants{}}
	if a.Encoding == acquisition.Spoke {
		var err error
		if l.c, _, err = condition.Measure(a, r.Conditioning); err != nil {
			return nil, err
		}
	}
	v := &ShotView{Shot: shot, Delay: l.delay}
	v.TimeNS, v.Real, v.Imag = l.trace(shot)
	if a.Encoding != acquisition.Spoke || a.Strength(shot) == 0 {
		return v, nil
	}
	if err := l.addProjections(v); err != nil {
		return nil, err
	}
	return v, l.addImage(v, image)
}

type looker struct {
	a     *acquisition.Acquisition
	r     recipe.Recipe
	c     *condition.Constants
	delay int
}

// trace returns the conditioned and phased trace of a shot, nothing for recorded projections.
func (l *looker) trace(shot int) (timeNS, re, im []float64) {
	if l.a.Domain == acquisition.Projection {
		return nil, nil, nil
	}
	zero, trace := l.a.TimeZeroSample+l.r.Conditioning.TimeShiftSamples, slices.Clone(l.a.Trace(l.delay, shot))
	if l.a.Encoding == acquisition.Spoke {
		corrector := condition.NewCorrector(l.a, l.r.Conditioning, l.c, []int{l.delay})
		corrector.Load(trace, l.delay, shot)
		zero = corrector.ZeroSample(shot)
	}
	turn := cmplx.Rect(1, -l.c.PhaseRad)
	for j, v := range trace {
		z := complex128(v) * turn
		timeNS = append(timeNS, (float64(j)-zero)*l.a.DwellNS)
		re, im = append(re, real(z)), append(im, imag(z))
	}
	return timeNS, re, im
}

func (l *looker) addProjections(v *ShotView) error {
	var err error
	if v.PositionMM, v.Projection, err = condition.ProjectionOf(l.a, l.r.Conditioning, l.c, l.delay, v.Shot); err != nil {
		return err
	}
	v.Neighbours = l.nearest(v.Shot)
	mean := make([]float64, len(v.PositionMM))
	for i := range v.Neighbours {
		n := &v.Neighbours[i]
		_, n.Real, _ = l.trace(n.Shot)
		position, values, err := condition.ProjectionOf(l.a, l.r.Conditioning, l.c, l.delay, n.Shot)
		if err != nil {
			return err
		}
		n.Projection = seenAt(v.PositionMM, position, values, n.Opposite)
		for x, p := range n.Projection {
			mean[x] += p / float64(len(v.Neighbours))
		}
	}
	if len(v.Neighbours) > 0 {
		v.OffNeighbours = distance(v.Projection, mean)
	}
	return nil
}

// nearest returns the kept shots whose axes are nearest to that of a shot, without their curves.
func (l *looker) nearest(shot int) []Neighbour {
	var all []Neighbour
	own := l.unit(shot)
	for _, other := range l.r.Conditioning.KeptShots(l.a) {
		if other == shot {
			continue
		}
		n := l.unit(other)
		cosine := own[0]*n[0] + own[1]*n[1] + own[2]*n[2]
		angle := math.Acos(math.Min(1, math.Abs(cosine))) * 180 / math.Pi
		all = append(all, Neighbour{Shot: other, AngleDeg: angle, Opposite: cosine < 0})
	}
	sort.SliceStable(all, func(i, j int) bool { return all[i].AngleDeg < all[j].AngleDeg })
	return all[:min(len(all), neighboursShown(l.a.Dim))]
}

func (l *looker) unit(shot int) [3]float64 {
	g, strength := l.a.GradientMTPerM[shot], l.a.Strength(shot)
	return [3]float64{g[0] / strength, g[1] / strength, g[2] / strength}
}

// seenAt returns values given at rising positions at other positions, by straight lines, 0 beyond; mirrored about the
// gradient centre where opposite.
func seenAt(wanted, position, values []float64, opposite bool) []float64 {
	out := make([]float64, len(wanted))
	for i, x := range wanted {
		if opposite {
			x = -x
		}
		k := sort.SearchFloat64s(position, x)
		switch {
		case k < len(position) && position[k] == x:
			out[i] = values[k]
		case k > 0 && k < len(position):
			share := (x - position[k-1]) / (position[k] - position[k-1])
			out[i] = values[k-1]*(1-share) + values[k]*share
		}
	}
	return out
}

func (l *looker) addImage(v *ShotView, image []float32) error {
	if image == nil {
		return nil
	}
	g, err := gridOf(l.a, l.r)
	if err != nil {
		return err
	}
	if len(image) != g.Voxels() {
		return fault.New(fault.Bug, "shot", "an image of %d voxels; the recipe makes %d", len(image), g.Voxels())
	}
	v.FromImage = forward.Projection(g, image, l.unit(v.Shot), v.PositionMM)
	v.OffImage = distance(v.Projection, v.FromImage)
	return nil
}

// distance returns the root of the summed squared difference over the size of the first; 0 when that is nothing.
func distance(own, other []float64) float64 {
	var off, size float64
	for i, p := range own {
		off += (p - other[i]) * (p - other[i])
		size += p * p
	}
	if size == 0 {
		return 0
	}
	return math.Sqrt(off / size)
}
