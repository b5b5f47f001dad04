package region

import (
	"math"

	"gonum.org/v1/gonum/mat"

	"torrloom/recon/fault"
)

// Rigid is a turn followed by a shift: r -> Turn·r + ShiftMM.
type Rigid struct {
	Turn    [3][3]float64 `json:"turn"`
	ShiftMM [3]float64    `json:"shiftMM"`
}

// orthogonal is how far the turn may be from one, for numbers typed with six digits.
const orthogonal = 1e-5

func (t *Rigid) check() error {
	for a := range 3 {
		for b := range 3 {
			want := 0.0
			if a == b {
				want = 1
			}
			dot := t.Turn[a][0]*t.Turn[b][0] + t.Turn[a][1]*t.Turn[b][1] + t.Turn[a][2]*t.Turn[b][2]
			if !(math.Abs(dot-want) <= orthogonal) {
				return badSetting("move.turn", "the rows are not at right angles or not of length 1; a turn does not stretch or shear")
			}
		}
	}
	if determinant(t.Turn) < 0 {
		return badSetting("move.turn", "it is a mirror image; a turn keeps left and right")
	}
	if !finite(t.ShiftMM[:]...) {
		return badSetting("move.shiftMM", "%v mm; a finite shift is needed", t.ShiftMM)
	}
	return nil
}

func determinant(m [3][3]float64) float64 {
	return m[0][0]*(m[1][1]*m[2][2]-m[1][2]*m[2][1]) - m[0][1]*(m[1][0]*m[2][2]-m[1][2]*m[2][0]) + m[0][2]*(m[1][0]*m[2][1]-m[1][1]*m[2][0])
}

// Forth returns where r is moved to.
func (t *Rigid) Forth(r [3]float64) [3]float64 {
	out := t.ShiftMM
	for a := range 3 {
		for b := range 3 {
			out[a] += t.Turn[a][b] * r[b]
		}
	}
	return out
}

// Back returns what is moved to r.
func (t *Rigid) Back(r [3]float64) [3]float64 {
	var out [3]float64
	for a := range 3 {
		for b := range 3 {
			out[a] += t.Turn[b][a] * (r[b] - t.ShiftMM[b])
		}
	}
	return out
}

// Landmark is one point seen in two images, in mm.
type Landmark struct {
	Name   string     `json:"name,omitempty"`
	FromMM [3]float64 `json:"fromMM"` // in the image that is moved
	ToMM   [3]float64 `json:"toMM"`   // in the acquisition
}

// Alignment is the best rigid motion over paired landmarks.
type Alignment struct {
	Move        Rigid     `json:"move"`
	ResidualMM  []float64 `json:"residualMM"`  // distance left at each landmark
	RMSMM       float64   `json:"rmsMM"`       // root of the mean of their squares
	LeftOutMM   []float64 `json:"leftOutMM"`   // distance of each landmark under the motion of the others; empty below four
	AngleDeg    float64   `json:"angleDeg"`    // of the turn
	Determinacy float64   `json:"determinacy"` // second over first singular value of the spread: near 0 the landmarks lie on a line
}

// Align returns the turn and shift that bring the From points closest to the To points in the least-squares sense. No
// mirror image and no scaling is allowed. A small residual does not prove a good alignment when the landmarks lie close
// together; LeftOutMM is the fairer judge.
//
// Errors: no-answer for fewer than three landmarks, or landmarks on one line.
// Source: Kabsch, Acta Crystallographica A32 (1976) 922; the sign by Umeyama, IEEE Transactions on Pattern Analysis and
// Machine Intelligence 13 (1991) 376, eqs. 34-42 with scale 1.
func Align(landmarks []Landmark) (*Alignment, error) {
	if len(landmarks) < 3 {
		return nil, fault.New(fault.NoAnswer, "landmarks", "%d pairs; a turn and a shift need at least three that do not lie on one line", len(landmarks))
	}
	for i, l := range landmarks {
		if !finite(l.FromMM[:]...) || !finite(l.ToMM[:]...) {
			return nil, badSetting("landmarks", "pair %d has a coordinate that is not a finite number", i+1)
		}
	}
	out, err := align(landmarks)
	if err != nil {
		return nil, err
	}
	if len(landmarks) > 3 {
		out.LeftOutMM = leftOut(landmarks)
	}
	return out, nil
}

// onLine is the spread across the line, relative to along it, below which the turn about the line is anybody's guess.
const onLine = 1e-3

func align(landmarks []Landmark) (*Alignment, error) {
	from, to := centroids(landmarks)
	spread := mat.NewDense(3, 3, nil) // Σ (to - mean)(from - mean)ᵀ
	for _, l := range landmarks {
		for a := range 3 {
			for b := range 3 {
				spread.Set(a, b, spread.At(a, b)+(l.ToMM[a]-to[a])*(l.FromMM[b]-from[b]))
			}
		}
	}
	var svd mat.SVD
	if !svd.Factorize(spread, mat.SVDFull) {
		return nil, fault.New(fault.NoAnswer, "landmarks", "the singular values do not converge; look for a landmark far from all others")
	}
	out := &Alignment{}
	if values := svd.Values(nil); values[0] > 0 {
		out.Determinacy = values[1] / values[0]
	}
	if !(out.Determinacy > onLine*onLine) {
		return nil, fault.New(fault.NoAnswer, "landmarks", "they lie on one line or in one place; add one to the side")
	}
	out.Move.Turn = turnOf(&svd)
	turned := (&Rigid{Turn: out.Move.Turn}).Forth(from)
	for a := range 3 {
		out.Move.ShiftMM[a] = to[a] - turned[a]
	}
	out.judge(landmarks)
	return out, nil
}

func centroids(landmarks []Landmark) (from, to [3]float64) {
	n := float64(len(landmarks))
	for _, l := range landmarks {
		for a := range 3 {
			from[a] += l.FromMM[a] / n
			to[a] += l.ToMM[a] / n
		}
	}
	return from, to
}

// turnOf returns U·diag(1, 1, det(U)·det(V))·Vᵀ.
func turnOf(svd *mat.SVD) [3][3]float64 {
	var u, v mat.Dense
	svd.UTo(&u)
	svd.VTo(&v)
	sign := 1.0
	if mat.Det(&u)*mat.Det(&v) < 0 {
		sign = -1
	}
	var turn [3][3]float64
	for a := range 3 {
		for b := range 3 {
			turn[a][b] = u.At(a, 0)*v.At(b, 0) + u.At(a, 1)*v.At(b, 1) + sign*u.At(a, 2)*v.At(b, 2)
		}
	}
	return turn
}

func (out *Alignment) judge(landmarks []Landmark) {
	sum := 0.0
	for _, l := range landmarks {
		d := distanceMM(out.Move.Forth(l.FromMM), l.ToMM)
		out.ResidualMM = append(out.ResidualMM, d)
		sum += d * d
	}
	out.RMSMM = math.Sqrt(sum / float64(len(landmarks)))
	trace := out.Move.Turn[0][0] + out.Move.Turn[1][1] + out.Move.Turn[2][2]
	out.AngleDeg = math.Acos(math.Max(-1, math.Min(1, (trace-1)/2))) * 180 / math.Pi
}

// leftOut returns each landmark's distance under the motion that the others give, nothing when some of those do not
// determine one.
func leftOut(landmarks []Landmark) []float64 {
	var out []float64
	for i, l := range landmarks {
		others := append(append([]Landmark(nil), landmarks[:i]...), landmarks[i+1:]...)
		a, err := align(others)
		if err != nil {
			return nil
		}
		out = append(out, distanceMM(a.Move.Forth(l.FromMM), l.ToMM))
	}
	return out
}

func distanceMM(p, q [3]float64) float64 {
	return math.Sqrt((p[0]-q[0])*(p[0]-q[0]) + (p[1]-q[1])*(p[1]-q[1]) + (p[2]-q[2])*(p[2]-q[2]))
}
