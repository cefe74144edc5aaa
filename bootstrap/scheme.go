package bootstrap

import (
	"fmt"

	"onebarrier/models/fit"
)

// Scheme says how resamples are made.
type Scheme string

// The schemes.
const (
	// Residual adds residuals drawn with replacement to a fitted curve. They are
	// standardised first, r/√(V(1-h)), and centred; entries with leverage
	// h > 0.99 are left out of the pool. A drawn residual is multiplied by √V of
	// the entry that it is added to.
	Residual Scheme = "residual"
	// Pairs draws entries (T, k) with replacement, or the points within each
	// temperature where every temperature has at least two.
	Pairs Scheme = "pairs"
	// Wild adds r/√(1-h) of the same entry with a random sign: for unequal spread.
	//
	// C. F. J. Wu, Ann. Statist. 14 (1986) 1261.
	Wild Scheme = "wild"
	// Parametric adds normal errors of standard deviation σ̂√V, or √V where σ is
	// known.
	Parametric Scheme = "parametric"
)

// Schemes lists them in the order of the documentation.
var Schemes = []Scheme{Residual, Pairs, Wild, Parametric}

// DefaultScheme is Parametric where the standard deviations are known, else
// Residual.
func DefaultScheme(m fit.ErrorModel) Scheme {
	if m.KnownSigma() {
		return Parametric
	}
	return Residual
}

// Refusal is an error that says why these data cannot be resampled, with a cure.
type Refusal struct {
	Code    string // stable: scheme-unknown, pairs-too-few, wild-too-few, limits-scheme, pairs-across-sources, no-scatter, no-degrees-of-freedom
	Message string
	Cure    string
}

// Error implements error.
func (r *Refusal) Error() string { return "bootstrap: " + r.Message + "; " + r.Cure }

// minResampled is the smallest number of entries for pairs without replicates
// and for wild: with fewer there are too few different resamples, and too many
// that lack the temperatures a curve needs.
const minResampled = 8

// Check refuses, with a *Refusal, a scheme that n entries cannot bear. replicated
// says that every temperature has at least two points to draw from.
func (s Scheme) Check(n int, replicated bool) error {
	switch s {
	case Residual, Parametric:
	case Pairs:
		if !replicated && n < minResampled {
			return &Refusal{"pairs-too-few",
				fmt.Sprintf("resampling pairs needs at least %d temperatures, or two points or more at every one; has %d", minResampled, n),
				"use the residual or the parametric scheme"}
		}
	case Wild:
		if n < minResampled {
			return &Refusal{"wild-too-few",
				fmt.Sprintf("the wild bootstrap needs at least %d temperatures, has %d", minResampled, n),
				"use the residual or the parametric scheme"}
		}
	default:
		return &Refusal{"scheme-unknown", fmt.Sprintf("no scheme is named %q", string(s)),
			fmt.Sprintf("use one of %v", Schemes)}
	}
	return nil
}
