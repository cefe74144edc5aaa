package diagnostics

import (
	"cmp"
	"math"
	"slices"

	"onebarrier/bootstrap"
	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
)

// Ways of taking several points at one temperature.
const (
	ReplicatesMeans       = "means"
	ReplicatesIndependent = "independent"
)

// Bases of the verdict.
const (
	BasisMeans  = "temperature-means"
	BasisPoints = "points"
)

// prepared is a data set as the fits see it.
type prepared struct {
	points []dataset.Point // those that take part, by T then row
	single *fit.Sample     // one entry a point
	means  *fit.Sample     // one entry a temperature; nil where every T is measured once
	group  []int           // for each point the index of its mean
	sample *fit.Sample     // single or means, whichever the verdict uses
	basis  string
	limits []dataset.Point // those that enter as limits, in the order of the samples'
	bounds []fit.Limit     // of limits, before offsets
	// sources says how several sources are taken; nil where there is one.
	sources *sourceSplit
	source  []int // of each point; nil where there is one
	bounded []int // sources of limits
	// temperatureShare is the largest part of a relative variance that u(T)
	// alone makes up, as a standard deviation of ln k; 0 without u(T).
	temperatureShare float64
}

// prepare turns the used points of a set into samples under one error model.
// Uncertainties of T enter by effective variance where those of k are known:
// s_i² += (E u(T_i)/(R T_i²))², with E from the straight fit, computed once
// (METHODS §3).
func prepare(set *dataset.Set, model fit.ErrorModel, replicates string) (*prepared, error) {
	p := &prepared{points: set.UsedPoints()}
	slices.SortStableFunc(p.points, func(a, b dataset.Point) int {
		return cmp.Or(cmp.Compare(a.T, b.T), cmp.Compare(a.Row, b.Row))
	})
	p.bySource(set)
	n := len(p.points)
	t, k, v := make([]float64, n), make([]float64, n), make([]float64, n)
	for i, pt := range p.points {
		t[i], k[i] = pt.T, pt.K
		v[i] = variance(pt, model)
	}
	var err error
	if p.single, err = fit.NewSample(model, t, k, v); err != nil {
		return nil, err
	}
	if err := p.addTemperatureVariance(); err != nil {
		return nil, err
	}
	p.readLimits(set)
	if err := p.choose(replicates); err != nil {
		return nil, err
	}
	if err := p.splitSources(replicates); err != nil {
		return nil, err
	}
	return p, nil
}

// choose forms the means and takes what the verdict uses.
func (p *prepared) choose(replicates string) error {
	if err := p.formMeans(); err != nil {
		return err
	}
	if err := p.addLimits(); err != nil {
		return err
	}
	p.sample, p.basis = p.single, BasisPoints
	if p.means != nil && replicates != ReplicatesIndependent {
		p.sample, p.basis = p.means, BasisMeans
	}
	return nil
}

// variance is that of ln k, or of k where the model is InK; up to a common
// factor where σ is estimated.
func variance(p dataset.Point, model fit.ErrorModel) float64 {
	switch model {
	case fit.Stated, fit.Scaled:
		s := p.UK / p.K
		return s * s
	case fit.StatedAbsolute:
		return p.UK * p.UK
	}
	return 1
}

// addTemperatureVariance adds what u(T) does to ln k, or k.
func (p *prepared) addTemperatureVariance() error {
	model := p.single.Model
	if !slices.ContainsFunc(p.points, func(pt dataset.Point) bool { return pt.UT > 0 }) {
		return nil
	}
	line := fit.Fit(p.single, models.Straight())
	if !line.Usable() {
		return nil
	}
	ut := make([]float64, len(p.points))
	for i, pt := range p.points {
		ut[i] = pt.UT
		share := math.Abs(line.P[1]) * pt.UT / (models.GasConstant * pt.T * pt.T)
		p.temperatureShare = max(p.temperatureShare, share)
	}
	if !model.KnownSigma() && model != fit.Scaled {
		return nil // σ̂ already holds it
	}
	var fitted []float64 // k, where variances are those of k
	if model.InK() {
		for _, l := range line.Fitted {
			fitted = append(fitted, math.Exp(l))
		}
	}
	v := fit.EffectiveVariance(p.single.V, p.single.T, ut, line.P[1], fitted)
	var err error
	p.single, err = fit.NewSample(model, p.single.T, p.single.K, v)
	return err
}

// formMeans builds the temperature means, of each source by itself: of ln k, or of k where the model is
// InK, weighted by 1/V, with variance 1/Σ(1/V).
func (p *prepared) formMeans() error {
	s := p.single
	p.group, p.means = make([]int, s.Len()), nil
	var t, m, v []float64
	for i := 0; i < s.Len(); {
		j, sw, swy := i, 0.0, 0.0
		for ; j < s.Len() && models.SameTemperature(s.T[i], s.T[j]) && p.sameSource(i, j); j++ {
			y := s.Y[j]
			if s.Model.InK() {
				y = s.K[j]
			}
			p.group[j] = len(t)
			sw += 1 / s.V[j]
			swy += y / s.V[j]
		}
		t, m, v = append(t, s.T[i]), append(m, swy/sw), append(v, 1/sw)
		i = j
	}
	if len(t) == s.Len() {
		return nil
	}
	if !s.Model.InK() {
		for i := range m {
			m[i] = math.Exp(m[i])
		}
	}
	var err error
	p.means, err = fit.NewSample(s.Model, t, m, v)
	return err
}

// behindMeans are the points behind the temperature means, for resampling pairs.
func (p *prepared) behindMeans() *bootstrap.Points {
	s := p.single
	b := &bootstrap.Points{Y: s.Y, Weight: make([]float64, s.Len()), Group: p.group}
	if s.Model.InK() {
		b.Y = s.K
	}
	for i, v := range s.V {
		b.Weight[i] = 1 / v
	}
	return b
}
