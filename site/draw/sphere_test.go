package draw

import (
	"encoding/json"
	"math"
	"testing"

	"torrloom/recon/phantom"
)

func placesOf(t *testing.T, directions [][3]float64, dim string) [][2]float64 {
	t.Helper()
	text, err := json.Marshal(directions)
	if err != nil {
		t.Fatal(err)
	}
	return evaluate[[][2]float64](t, `import { placeOf } from "./sphere"`, string(text)+`.map((n) => placeOf(n, `+dim+`))`)
}

// Directions that share the half sphere evenly share the disc evenly: a disc of radius r holds the share r² of them.
func TestTheMapOfDirectionsKeepsAreas(t *testing.T) {
	const shots = 4000
	places := placesOf(t, phantom.GoldenHalfSphere(shots), "3")
	for _, r := range []float64{0.3, 0.5, 0.7, 0.9} {
		inside := 0
		for _, p := range places {
			if p[0]*p[0]+p[1]*p[1] < r*r {
				inside++
			}
		}
		// The golden spiral fills every cap to within a few shots.
		if !(math.Abs(float64(inside)/shots-r*r) < 0.002) {
			t.Errorf("radius %g holds %.4f of the shots, wanted %.4f", r, float64(inside)/shots, r*r)
		}
	}
}

func TestADirectionAndItsOppositeHaveOnePlace(t *testing.T) {
	for dim, directions := range map[string][][3]float64{
		"2": {{3, 4, 0}, {-3, -4, 0}, {1, 0, 0}, {-1, 0, 0}},
		"3": {{1, 2, 3}, {-1, -2, -3}, {1, 2, 0}, {-1, -2, 0}, {5, 0, 0}, {-5, 0, 0}},
	} {
		places := placesOf(t, directions, dim)
		for i := 0; i < len(places); i += 2 {
			if !(math.Hypot(places[i][0]-places[i+1][0], places[i][1]-places[i+1][1]) < 1e-12) { // rounding
				t.Errorf("%sD: %v lies at %v, its opposite at %v", dim, directions[i], places[i], places[i+1])
			}
		}
	}
	if p := placesOf(t, [][3]float64{{0, 0, 2}, {2, 0, 0}}, "3"); p[0] != [2]float64{0, 0} || !(math.Abs(p[1][0]-1) < 1e-12) {
		t.Errorf("the pole lies at %v, wanted the middle; a direction across it at %v, wanted the edge", p[0], p[1])
	}
}

// Arrows reach every dot of a map from every other.
func TestArrowsReachEveryShot(t *testing.T) {
	text, err := json.Marshal(phantom.GoldenHalfSphere(150))
	if err != nil {
		t.Fatal(err)
	}
	reached := evaluate[int](t, `import { nextPlace, placeOf } from "./sphere"`, `(() => {
		const places = `+string(text)+`.map((n) => placeOf(n, 3));
		const reached = new Set([0]);
		for (const from of reached)
			for (const [dx, dy] of [[1, 0], [-1, 0], [0, 1], [0, -1]]) {
				const to = nextPlace(places, from, dx, dy);
				if (to !== undefined) reached.add(to);
			}
		return reached.size;
	})()`)
	if reached != 150 {
		t.Errorf("arrows lead to %d of 150 shots", reached)
	}
}
