package compare

import (
	"fmt"
	"strings"
)

// Number says how a number is called and written. The name is lower case and without an article: "hypoxic fraction".
type Number struct {
	Name   string  `json:"name"`
	Unit   string  `json:"unit"`
	Scale  float64 `json:"scale"`  // from the stored to the written number, 100 for a share in %; 0 means 1
	Places int     `json:"places"` // decimal places
	sign   bool
}

func (n Number) signed() Number {
	n.sign = true
	return n
}

// Bare writes the value without its unit. A value that rounds to zero has no sign.
func (n Number) Bare(v float64) string {
	if n.Scale != 0 {
		v *= n.Scale
	}
	format := "%.*f"
	if n.sign {
		format = "%+.*f"
	}
	text := fmt.Sprintf(format, n.Places, v)
	if !strings.ContainsAny(text, "123456789") {
		text = strings.TrimLeft(text, "+-")
	}
	return text
}

// Text writes the value with its unit.
func (n Number) Text(v float64) string { return strings.TrimSpace(n.Bare(v) + " " + n.Unit) }

// Span writes "low-high unit", or "low to high unit" where a minus sign stands.
func (n Number) Span(low, high float64) string {
	a, b := n.Bare(low), n.Text(high)
	if strings.HasPrefix(a, "-") || strings.HasPrefix(b, "-") {
		return a + " to " + b
	}
	return a + "-" + b
}
