package models

// Claims is what a curve says of itself beyond its code and its Info, in physical terms.
// The conformance suite holds the curve to it.
//
// All of it is for T_ref = 300 K and temperatures from 250 to 1000 K.
type Claims struct {
	// P holds ordinary canonical parameters, in which everything that the curve can do
	// occurs: E_loc that rises and E_loc that falls, where it can do both. At Extreme
	// parameters nothing but finite results is asked for, from 10 K to 100,000 K.
	P, Extreme [][]float64
	// Limit gives m and lnA of ln k → lnA + m ln(T/T_ref) as T → ∞; both NaN where ln k
	// goes faster than any power of T.
	Limit func(tRef float64, p []float64) (lnA, m float64)
	// Ascending lists pairs of canonical parameters that stay in order.
	Ascending [][2]int
	// Physical gives ln k at T from the parameters of each form, written from
	// the form's textbook formula.
	Physical map[string]func(fr Frame, q []float64, t float64) float64
	// Undefined lists the symbols of form parameters that do not exist for every
	// curve and are NaN then, with their derivatives.
	Undefined []string
	Relations []Relation
}

// Relation is an equation between the parameters of different forms, or between
// them and the local activation energy. Both sides are of the order of scale or
// smaller.
type Relation struct {
	Name  string
	Sides func(fr Frame, form func(name, symbol string) float64, eLoc func(t float64) float64) (left, right, scale float64)
}

// Claimed is a curve that states what it claims to be. Every registered curve does.
type Claimed interface {
	Curve
	Claims() Claims
}
