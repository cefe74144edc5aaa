package fit

import "math"

// PointInfluence says how much one entry of a sample bears on a fit. NaN is what the
// fit leaves undetermined: everything but Leverage where the entry determines its own
// fitted value (leverage 1) or no degree of freedom is left, and Studentised where
// only one is.
type PointInfluence struct {
	Leverage float64 // h_i, the diagonal of the hat matrix; they sum to the number of parameters
	// Standardised is r_i/(σ̂ √(V_i(1-h_i))).
	Standardised float64
	// Studentised is the same with σ̂ from the fit without the entry: where errors are
	// normal it follows Student's t with ν-1 degrees of freedom. Standardised where σ
	// is known.
	Studentised float64
	// Cook is Cook's distance, the change of all fitted values that leaving the entry
	// out makes, in units of p σ̂²: r_i² h_i/((1-h_i) p), with r_i standardised.
	Cook float64
}

// Influence gives the influence of each entry of the sample s, to which r was fitted;
// nil where r has no estimates. For curves that are not linear in their parameters,
// and for errors in k, it is that of the fit linearised about the estimates.
// R. D. Cook, Technometrics 19 (1977) 15; studentised residuals as in R. D. Cook,
// S. Weisberg, Residuals and Influence in Regression (1982), section 2.2.
func Influence(r *Result, s *Sample) []PointInfluence {
	if !r.Usable() || r.Leverage == nil {
		return nil
	}
	if s.Len() != len(r.Leverage) {
		panic("fit: influence needs the sample that was fitted")
	}
	p, nu := float64(r.Params()), float64(r.Nu)
	out := make([]PointInfluence, len(r.Leverage))
	for i, h := range r.Leverage {
		nan := math.NaN()
		out[i] = PointInfluence{Leverage: h, Standardised: nan, Studentised: nan, Cook: nan}
		// Rounding leaves 1 - h of an entry that determines itself at about 1e-16.
		if !(1-h > 1e-12) || !(r.Sigma > 0) {
			continue
		}
		z := r.Residuals[i] / (r.Sigma * math.Sqrt(s.V[i]*(1-h)))
		out[i].Standardised = z
		out[i].Cook = z * z * h / ((1 - h) * p)
		switch {
		case s.Model.KnownSigma():
			out[i].Studentised = z
		case nu > 1:
			// σ̂² without the entry is σ̂² (ν - z²)/(ν - 1).
			out[i].Studentised = z * math.Sqrt((nu-1)/math.Max(0, nu-z*z))
		}
	}
	return out
}
