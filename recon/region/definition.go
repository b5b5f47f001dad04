package region

import (
	"bytes"
	"encoding/json"
	"errors"
	"math"
	"slices"
	"strconv"
	"strings"

	"torrloom/recon/fault"
	"torrloom/recon/volume"
)

// Definition says how a region is made, as a recipe keeps it. The parts are put together in their order; the margin is
// applied at the end.
type Definition struct {
	Name     string  `json:"name"`
	Parts    []Part  `json:"parts"`
	MarginMM float64 `json:"marginMM,omitempty"` // grows the region, or shrinks it when negative
}

// Part is one shape of a definition. Exactly one of the pointers is set.
type Part struct {
	Combine  string  `json:"combine"`            // row of Combinations; the first part is "add"
	MarginMM float64 `json:"marginMM,omitempty"` // of this part alone

	Polygon   *Polygon   `json:"polygon,omitempty"`
	Ellipse   *Ellipse   `json:"ellipse,omitempty"`
	Brush     *Brush     `json:"brush,omitempty"`
	Ellipsoid *Ellipsoid `json:"ellipsoid,omitempty"`
	Box       *Box       `json:"box,omitempty"`
	Threshold *Threshold `json:"threshold,omitempty"`
	Carried   *Carried   `json:"carried,omitempty"`
	Region    *Reference `json:"region,omitempty"`
}

// shape is what every row of Shapes makes masks from.
type shape interface {
	check() error
	mask(g volume.Grid, c Context) (Mask, error)
}

// ShapeRow names a shape for a form and finds it in a part; Of returns nil when the part is another shape.
type ShapeRow struct {
	Name  string `json:"name"`
	Label string `json:"label"`
	of    func(p Part) shape
}

// Shapes lists every shape.
var Shapes = []ShapeRow{
	{"polygon", "polygon", func(p Part) shape { return orNil(p.Polygon) }},
	{"ellipse", "ellipse", func(p Part) shape { return orNil(p.Ellipse) }},
	{"brush", "brush", func(p Part) shape { return orNil(p.Brush) }},
	{"ellipsoid", "sphere or ellipsoid", func(p Part) shape { return orNil(p.Ellipsoid) }},
	{"box", "box", func(p Part) shape { return orNil(p.Box) }},
	{"threshold", "threshold of a map", func(p Part) shape { return orNil(p.Threshold) }},
	{"carried", "mask from a file", func(p Part) shape { return orNil(p.Carried) }},
	{"region", "another region", func(p Part) shape { return orNil(p.Region) }},
}

// orNil returns a true nil for a nil pointer, which an interface would hide.
func orNil[T any, P interface {
	*T
	shape
}](p P) shape {
	if p == nil {
		return nil
	}
	return p
}

// Context is what shapes may refer to.
type Context struct {
	Maps    map[string][]float32 // by name; one value per voxel, NaN where there is none
	Volumes map[string]*Volume   // masks from files, by name
	Regions map[string]Mask      // made before this one
}

// Reference is another region, by name. It must stand before the region that uses it.
type Reference struct {
	Name string `json:"name"`
}

func (r *Reference) check() error {
	if r.Name == "" {
		return badSetting("region.name", "no name; name a region that stands before this one")
	}
	return nil
}

func (r *Reference) mask(_ volume.Grid, c Context) (Mask, error) {
	m, known := c.Regions[r.Name]
	if !known {
		return nil, badSetting("region.name", "%q is not a region before this one", r.Name)
	}
	return slices.Clone(m), nil
}

// UnmarshalJSON reads a definition and refuses keys that have no field.
func (d *Definition) UnmarshalJSON(text []byte) error {
	type plain Definition // without this method
	decoder := json.NewDecoder(bytes.NewReader(text))
	decoder.DisallowUnknownFields()
	var p plain
	if err := decoder.Decode(&p); err != nil {
		var wrong *json.UnmarshalTypeError
		if errors.As(err, &wrong) {
			return badSetting("regions "+wrong.Field, "a JSON %s was found; %s is wanted", wrong.Value, wrong.Type)
		}
		return badSetting("regions", "%s; see the keys of a region", strings.TrimPrefix(err.Error(), "json: "))
	}
	*d = Definition(p)
	return nil
}

// MostRegions bounds the regions of one recipe: enough for a study, few enough for a table.
const MostRegions = 100

// CheckAll returns a fault when a definition makes no sense or two share a name.
func CheckAll(definitions []Definition) error {
	if len(definitions) > MostRegions {
		return fault.New(fault.TooLarge, "regions", "%d regions, the limit is %d", len(definitions), MostRegions)
	}
	seen := map[string]bool{}
	for _, d := range definitions {
		if err := d.Check(); err != nil {
			return err
		}
		if seen[d.Name] {
			return badSetting("region "+d.Name, "two regions have this name; give each its own")
		}
		seen[d.Name] = true
	}
	return nil
}

// Check returns a fault when the definition makes no sense.
func (d Definition) Check() error {
	place := "region " + d.Name
	if strings.TrimSpace(d.Name) == "" || strings.ContainsAny(d.Name, "\r\n\t") || len(d.Name) > 80 {
		return badSetting("region name", "%q; a name has 1 to 80 characters on one line", d.Name)
	}
	if len(d.Parts) == 0 {
		return badSetting(place, "no parts; a region needs at least one shape")
	}
	if !finite(d.MarginMM) {
		return badSetting(place+" marginMM", "%g mm; a finite margin is needed", d.MarginMM)
	}
	for i, p := range d.Parts {
		if err := p.check(i); err != nil {
			return fault.Within(place+" part "+strconv.Itoa(i+1), err)
		}
	}
	return nil
}

func (p Part) check(i int) error {
	if _, err := p.combination(); err != nil {
		return err
	}
	if i == 0 && p.Combine != "add" {
		return badSetting("combine", "%q; the first part can only be added", p.Combine)
	}
	if !finite(p.MarginMM) {
		return badSetting("marginMM", "%g mm; a finite margin is needed", p.MarginMM)
	}
	s, err := p.shape()
	if err != nil {
		return err
	}
	return s.check()
}

func (p Part) combination() (Combination, error) {
	at := slices.IndexFunc(Combinations, func(c Combination) bool { return c.Name == p.Combine })
	if at < 0 {
		return Combination{}, badSetting("combine", "%q is not known; use add, keep or take", p.Combine)
	}
	return Combinations[at], nil
}

func (p Part) shape() (shape, error) {
	var found shape
	for _, row := range Shapes {
		if s := row.of(p); s != nil {
			if found != nil {
				return nil, badSetting("shape", "more than one shape in a part; split it into parts")
			}
			found = s
		}
	}
	if found == nil {
		return nil, badSetting("shape", "none; a part needs one of polygon, ellipse, brush, ellipsoid, box, threshold, carried, region")
	}
	return found, nil
}

// Make returns the mask of a definition on a grid.
//
// Errors: those of Check; bad-setting when the context lacks what a part refers to.
func (d Definition) Make(g volume.Grid, c Context) (Mask, error) {
	if err := d.Check(); err != nil {
		return nil, err
	}
	out := make(Mask, g.Voxels())
	for i, p := range d.Parts {
		s, err := p.shape()
		if err != nil {
			return nil, err
		}
		m, err := s.mask(g, c)
		if err != nil {
			return nil, fault.Within("region "+d.Name+" part "+strconv.Itoa(i+1), err)
		}
		join, err := p.combination()
		if err != nil {
			return nil, err
		}
		out = combine(out, Margin(g, m, p.MarginMM), join)
	}
	return Margin(g, out, d.MarginMM), nil
}

// MakeAll returns the masks of definitions, each of which may refer to those before it.
//
// Errors: those of CheckAll and Make.
func MakeAll(definitions []Definition, g volume.Grid, c Context) ([]Mask, error) {
	if err := CheckAll(definitions); err != nil {
		return nil, err
	}
	known := map[string]Mask{}
	c.Regions = known
	var out []Mask
	for _, d := range definitions {
		m, err := d.Make(g, c)
		if err != nil {
			return nil, err
		}
		known[d.Name] = m
		out = append(out, m)
	}
	return out, nil
}

// Maps returns the names of the maps that the definitions refer to, each once, so that a caller knows which stages a
// region waits for.
func Maps(definitions []Definition) []string {
	var out []string
	for _, d := range definitions {
		for _, p := range d.Parts {
			if p.Threshold != nil && !slices.Contains(out, p.Threshold.Map) {
				out = append(out, p.Threshold.Map)
			}
		}
	}
	return out
}

// rounding is how far beyond its edge a shape still takes a voxel centre, in mm: far below any voxel, far above the
// rounding of coordinates.
const rounding = 1e-9

func positive(values ...float64) bool {
	for _, v := range values {
		if !(v > 0) || math.IsInf(v, 0) {
			return false
		}
	}
	return true
}
