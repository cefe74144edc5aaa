package modeltest

import "onebarrier/models"

// Case is what the suite must know of a curve beyond the curve's own code: what the curve
// claims to be, and where that is checked.
type Case struct {
	// TRef is the reference temperature of the canonical parameters and T the
	// temperatures of the checks, in K.
	TRef float64
	T    []float64
	models.Claims
}

// CaseOf is the case of a curve; an empty one, which fails, where the curve states no
// claims.
func CaseOf(c models.Curve) Case {
	cs := Case{TRef: 300, T: []float64{250, 278.15, 299.999, 300, 300.001, 312.5, 340, 500, 1000}}
	if c, ok := c.(models.Claimed); ok {
		cs.Claims = c.Claims()
	}
	return cs
}
