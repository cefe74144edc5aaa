package fit

import (
	"fmt"
	"math"

	"onebarrier/models"
)

// ErrorModel says what is assumed about the errors of the rate constants.
type ErrorModel string

// The error models.
const (
	// Relative: ln k_i = f(T_i) + ε_i with one unknown σ.
	Relative ErrorModel = "relative"
	// Stated: the same with known s_i = u(k_i)/k_i.
	Stated ErrorModel = "stated"
	// Scaled: s_i known up to one common factor.
	Scaled ErrorModel = "scaled"
	// Absolute: k_i = exp f(T_i) + e_i with one unknown σ.
	Absolute ErrorModel = "absolute"
	// StatedAbsolute: the same with known u(k_i).
	StatedAbsolute ErrorModel = "stated-absolute"
)

// ErrorModels lists them in the order of the documentation.
var ErrorModels = []ErrorModel{Relative, Stated, Scaled, Absolute, StatedAbsolute}

// KnownSigma reports whether the errors' standard deviations are taken as known,
// so that no σ is estimated.
func (m ErrorModel) KnownSigma() bool { return m == Stated || m == StatedAbsolute }

// InK reports whether errors are additive in k rather than in ln k.
func (m ErrorModel) InK() bool { return m == Absolute || m == StatedAbsolute }

// Sample is what a fit sees: one entry for each point or temperature mean, in
// order of T. It is never modified.
type Sample struct {
	T []float64 // temperature, K
	Y []float64 // ln k; NaN where k <= 0, which only InK models allow
	K []float64 // k in the data's unit
	// V holds the variance of each entry: known (σ_i²) under Stated and
	// StatedAbsolute, else up to the common factor σ² (1/number of points of a
	// mean under Relative and Absolute, s_i² under Scaled). Of ln k, or of k
	// where Model.InK().
	V     []float64
	Model ErrorModel
	TRef  float64 // reference temperature of canonical parameters, K
	// Limits are entries of which only a bound is known; the slices above hold the
	// measured ones alone.
	Limits []Limit
	// Nuisance holds columns in ln k, such as offsets between sources, whose
	// coefficients are estimated together with every curve: see WithOffsets. Each of
	// them counts as a parameter.
	Nuisance [][]float64
	// Shift is the sum of what was taken off ln k: the likelihood stays a density of
	// k as measured.
	Shift float64
}

// NewSample checks and completes a sample. tRef is the reciprocal of the
// weighted mean of 1/T.
func NewSample(model ErrorModel, t, k, v []float64) (*Sample, error) {
	if len(t) != len(k) || len(t) != len(v) {
		panic("fit: T, k and V must have the same length")
	}
	if len(t) == 0 {
		return nil, fmt.Errorf("fit: no points")
	}
	s := &Sample{Model: model, T: t, K: k, V: v, Y: make([]float64, len(t))}
	var sw, swx float64
	for i := range t {
		if !(t[i] > 0) || math.IsInf(t[i], 0) {
			return nil, fmt.Errorf("fit: point %d: T = %g K is not a positive temperature", i+1, t[i])
		}
		if !(v[i] > 0) || math.IsInf(v[i], 0) {
			return nil, fmt.Errorf("fit: point %d: variance %g is not positive", i+1, v[i])
		}
		s.Y[i] = math.NaN()
		switch {
		case k[i] > 0 && !math.IsInf(k[i], 0):
			s.Y[i] = math.Log(k[i])
		case !model.InK() || math.IsNaN(k[i]) || math.IsInf(k[i], 0):
			return nil, fmt.Errorf("fit: point %d: k = %g cannot be used under %q", i+1, k[i], model)
		}
		sw += 1 / v[i]
		swx += 1 / (v[i] * t[i])
	}
	s.TRef = sw / swx
	return s, nil
}

// Len is the number of points or means, limits not counted.
func (s *Sample) Len() int { return len(s.T) }

// DistinctT is the number of distinct temperatures, as models.SameTemperature tells
// them apart.
func (s *Sample) DistinctT() int { return models.CountTemperatures(s.T) }

// Range returns the lowest and the highest temperature in K.
func (s *Sample) Range() (low, high float64) {
	low, high = s.T[0], s.T[0]
	for _, t := range s.T[1:] {
		low, high = math.Min(low, t), math.Max(high, t)
	}
	return low, high
}
