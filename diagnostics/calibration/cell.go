// Package calibration measures the error rates of the verdict by simulation: how
// often straight data are called curved, how often curved ones are not, and how
// often intervals hold the truth. Data are drawn from formulas of its own and then
// go through diagnostics.Screen or diagnostics.Assess like any other data.
//
// Every data set has a random stream of its own, made from the seed, the condition
// and the number of the set: any number of workers gives the same counts.
package calibration

import (
	"encoding/binary"
	"fmt"
	"hash/fnv"
	"math"
	"math/rand/v2"
	"strings"

	"onebarrier/diagnostics"
	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
)

// Barrier and noise of every condition, and ln k at the middle of the range.
const (
	barrier       = 60.0 // kJ/mol
	relativeNoise = 0.03
	// absoluteNoise is the standard deviation of k in units of k at the middle of
	// the range.
	absoluteNoise = 0.01
	middleLnK     = -7
)

// badHot is how far a bad point is off, in standard deviations.
const badHot = 8

// Range is a range of temperatures in K.
type Range struct{ Low, High float64 }

// The ranges of the study: a thermostat bath, and a furnace or shock tube.
var (
	Narrow = Range{280, 340}
	Wide   = Range{250, 1000}
)

func (r Range) String() string { return fmt.Sprintf("%g–%g K", r.Low, r.High) }

// inverse is 1/(RT) in mol/kJ.
func inverse(t float64) float64 { return 1000 / (models.GasConstant * t) }

// Truth is what the data are drawn from: one barrier, bent by an exponent of T and
// by a second path. The zero value is one Arrhenius barrier.
type Truth struct {
	Exponent float64
	// Step is the difference of the barriers of two paths times the range of
	// 1/(RT); 0: one path. Where it is positive they are parallel and E rises
	// with T; where it is negative they are in series and E falls.
	Step float64
	// Crossover is where both paths are as fast, as a share of the range of 1/T
	// counted from the hot end.
	Crossover float64
	// Level is added to ln k: the unit of k.
	Level float64
}

// at returns ln k and E_loc in kJ/mol at one temperature.
func (tr Truth) at(r Range, t float64) (lnK, e float64) {
	middle := (r.Low + r.High) / 2
	x, hot, cold := inverse(t), inverse(r.High), inverse(r.Low)
	lnK = middleLnK + tr.Level + tr.Exponent*math.Log(t/middle) - barrier*(x-inverse(middle))
	e = barrier + tr.Exponent*models.GasConstant*t/1000
	if tr.Step != 0 {
		d := math.Abs(tr.Step)
		z := d * ((x-hot)/(cold-hot) - tr.Crossover)
		sign := math.Copysign(1, tr.Step)
		lnK += sign * math.Log1p(math.Exp(-z))
		e += sign * d / (cold - hot) / (1 + math.Exp(z))
	}
	return lnK, e
}

// Shape is the distribution of errors.
type Shape int

// The shapes, all with the same standard deviation but for Outliers.
const (
	Gaussian Shape = iota
	Student3       // Student's t with 3 degrees of freedom
	Outliers       // Gaussian; one point in twenty is off by a log-normal factor of 5 σ more
	BadHot         // Gaussian; the hottest point reads 8 σ too high, whatever its own error
)

// deviate draws one error of unit standard deviation.
func (s Shape) deviate(rng *rand.Rand) float64 {
	z := rng.NormFloat64()
	switch s {
	case Student3:
		var chi2 float64
		for range 3 {
			v := rng.NormFloat64()
			chi2 += v * v
		}
		return z / math.Sqrt(chi2) // t/√3: t has variance 3
	case Outliers:
		if rng.Float64() < 0.05 {
			z += 5 * rng.NormFloat64()
		}
	}
	return z
}

// Repeats says how often each temperature is measured.
type Repeats int

// The plans of repeats.
const (
	Once      Repeats = iota
	Triplets          // three times
	OneToFour         // 1, 2, 3, 4, 1, … times
)

func (r Repeats) at(i int) int {
	switch r {
	case Triplets:
		return 3
	case OneToFour:
		return 1 + i%4
	}
	return 1
}

// Limits says what becomes of points below the detection limit.
type Limits int

// The ways of taking them.
const (
	Detected    Limits = iota // there is no limit: all are measured
	AsLimits                  // as limits
	LeftOut                   // not at all
	HalfTaken                 // half of the limit is taken as measured
	LimitsTaken               // the limit is taken as measured
)

// apply turns a point below the limit into what the analyst makes of it.
func (l Limits) apply(p *dataset.Point, limit float64) {
	if l == Detected || p.K >= limit {
		return
	}
	p.K = limit
	switch l {
	case AsLimits:
		p.Used, p.Limit = false, "<"
	case LeftOut:
		p.Used = false
	case HalfTaken:
		p.K /= 2
	}
}

// Cell is one condition of the study.
type Cell struct {
	Range Range
	N     int // temperatures, at equal steps
	Truth Truth
	// Shape of the errors; in ln k, or in k where Absolute.
	Shape    Shape
	Absolute bool
	// Uneven gives the points standard deviations in the ratio 1 : 1.5 : 0.7.
	Uneven     bool
	Repeats    Repeats
	Thermostat bool // every temperature has an error that its repeats share, as large as theirs
	// Stated is the stated uncertainty over the true one; 0: none is stated.
	Stated float64
	// Model is the error model asked for; "" leaves it to the data.
	Model fit.ErrorModel
	// Limits is what becomes of points below a detection limit, which a fifth of the
	// range at its cold end has its k below.
	Limits Limits
	// Laboratories says who measures what; Offsets multiplies the offsets between them.
	Laboratories Laboratories
	Offsets      float64
	// Lean leaves all candidates but straight and power-prefactor out, where the
	// verdict does not depend on them: all but stated uncertainties.
	Lean bool
	// Every takes every curve of the catalogue as a candidate.
	Every bool
	// Compare asks only which error model has the lower AICc on the line, relative
	// or absolute.
	Compare bool
	// Resamples asks for bootstrap intervals too.
	Resamples int
	// Shares asks for the whole of Assess, for its repeat shares.
	Shares bool
	// Found is for the findings.
	Found Found
}

// name identifies the condition in its random streams.
func (c Cell) name() string {
	name := fmt.Sprintf("%+v", c)
	name = strings.Replace(name, " Every:false", "", 1)
	if c.Limits == Detected { // conditions without limits keep their streams
		name = strings.Replace(name, fmt.Sprintf(" Limits:%d", c.Limits), "", 1)
	}
	if c.Laboratories == One { // so do those of one laboratory
		name = strings.Replace(name, fmt.Sprintf(" Laboratories:%d Offsets:%g", c.Laboratories, c.Offsets), "", 1)
	}
	if c.Found == (Found{}) { // and those without findings
		name = strings.Replace(name, fmt.Sprintf(" Found:%+v", c.Found), "", 1)
	}
	return name
}

// stream is the random stream of one data set.
func (c Cell) stream(seed uint64, index int) *rand.Rand {
	h := fnv.New64a()
	h.Write([]byte(c.name()))
	var key [32]byte
	binary.LittleEndian.PutUint64(key[0:], seed)
	binary.LittleEndian.PutUint64(key[8:], h.Sum64())
	binary.LittleEndian.PutUint64(key[16:], uint64(index))
	return rand.New(rand.NewChaCha8(key))
}

// detection is ln k below which nothing is detected where there is a limit.
func (c Cell) detection() float64 {
	lnK, _ := c.Truth.at(c.Range, c.Range.Low+0.2*(c.Range.High-c.Range.Low))
	return lnK
}

// draw draws one data set.
func (c Cell) draw(rng *rand.Rand) *dataset.Set {
	if c.Laboratories != One {
		return c.Laboratories.measured(c, rng)
	}
	set := &dataset.Set{
		Name:     "simulated",
		Quantity: dataset.Quantity{Symbol: "k", Unit: "s^-1", Known: true},
		Points:   make([]dataset.Point, 0, c.N*c.Repeats.at(2)),
	}
	middle, _ := c.Truth.at(c.Range, (c.Range.Low+c.Range.High)/2)
	detection := math.Exp(c.detection())
	uneven := [...]float64{1, 1.5, 0.7}
	order := c.Found.Runs.of(c.N, rng)
	for i := range c.N {
		t := c.Range.Low + (c.Range.High-c.Range.Low)*float64(i)/float64(c.N-1)
		lnK, _ := c.Truth.at(c.Range, t+c.Found.thermometer(rng))
		lnK = c.Found.bend(c, lnK, i, order[i])
		sd := relativeNoise * c.Found.spread(c.Range, t)
		if c.Uneven {
			sd *= uneven[i%len(uneven)]
		}
		var shared float64
		if c.Thermostat {
			shared = sd * rng.NormFloat64()
		}
		for range c.Repeats.at(i) {
			if c.Shape == BadHot && i == c.N-1 {
				shared = badHot * sd
			}
			p := dataset.Point{Row: len(set.Points) + 2, T: t, UT: c.Found.UT, Order: order[i], Used: true}
			if c.Absolute {
				p.K = math.Exp(lnK) + c.noiseInK(middle)*c.Shape.deviate(rng)
			} else {
				p.K = math.Exp(lnK + shared + sd*c.Shape.deviate(rng))
			}
			if c.Stated > 0 {
				p.UK, p.Level = c.Stated*sd*p.K, dataset.LevelStandard
			}
			c.Limits.apply(&p, detection)
			set.Points = append(set.Points, p)
		}
	}
	return set
}

// options are those of Assess for this condition.
func (c Cell) options(designs *diagnostics.DesignCache) diagnostics.Options {
	o := diagnostics.DefaultOptions()
	o.ErrorModel = c.Model
	o.Resamples = 0
	o.Designs = designs
	if c.Every {
		o.Models = models.All()
	}
	if c.Lean {
		o.Models = []models.Curve{models.Straight(), models.PowerPrefactor{}}
	}
	return o
}
