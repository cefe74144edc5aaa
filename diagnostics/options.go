package diagnostics

import (
	"fmt"
	"slices"
	"strings"

	"onebarrier/bootstrap"
	"onebarrier/models"
	"onebarrier/models/fit"
)

// Options say how to assess a data set. Start from DefaultOptions.
type Options struct {
	// ErrorModel is "" to let the data's stated uncertainties decide.
	ErrorModel fit.ErrorModel
	// Replicates is ReplicatesMeans (default) or ReplicatesIndependent.
	Replicates string
	// Sources is SourcesOffsets (default: each source has an offset of its own in ln k)
	// or SourcesAsOne.
	Sources string
	// PrefactorBand holds the exponents that a usual prefactor gives; default
	// [0, 1]. It must hold 0.
	PrefactorBand [2]float64
	// Tolerance is the |ΔE| too small to matter: "5%" of the straight fit's |E|,
	// or "0.5kJ/mol"; default "" is 5 %, at least 0.5 kJ/mol.
	Tolerance string
	// ThermometerError is what the thermometer may be wrong by, of each shape, such as
	// "offset=0.5K,gain=0.5K,bow=0.1K"; "" takes the largest u(T) where every used
	// point has one, else that default.
	ThermometerError string
	// Confidence of every interval; default 0.95.
	Confidence float64
	// Criterion that ranks: aicc (default), aic or bic.
	Criterion string
	// Models are the candidates; nil takes models.Default().
	Models []models.Curve
	// Resamples of the bootstrap, 0 for none; default 9999. Where they would take long
	// (more than 3 s of one core, as estimated) it is lowered unless KeepResamples is set.
	Resamples     int
	KeepResamples bool
	// Scheme of the bootstrap; "" chooses by error model.
	Scheme string
	// Intervals are the bootstrap methods: bootstrap-t (default), percentile, bca.
	Intervals []string
	// Seed of every random stream; default 1.
	Seed uint64
	// Workers is the number of goroutines, 0 for one a processor. It does not
	// change the result.
	Workers int
	// ReferenceTemperature in K; 0 takes 298.15 K where that lies in the measured
	// range, else T_eff to the nearest kelvin, so that nothing is extrapolated
	// unasked.
	ReferenceTemperature float64
	EnergyUnit           string // kJ/mol (default), kcal/mol, eV, K or cm^-1
	// KeepEnergyUnit publishes in EnergyUnit where the style that the unit of k asks for
	// has another: the molar style then stands in for it.
	KeepEnergyUnit bool
	PublishStyle   string   // molar, kelvin, evaluated, electronvolt; "" decides by unit
	Selection      []string // how rows were left out, for the record
	Version        string   // of the program, for the record
	// SequentialNull draws the null of the second-barrier test only until p is plainly
	// not small; p is exact all the same, and coarser where it is large. What rests on
	// the ends of the range is then told of findings alone. For many data sets.
	SequentialNull bool
	// Designs, if not nil, keeps the prepared second-barrier tests of designs, for
	// assessments of many data sets of one design, as in simulations.
	Designs *DesignCache
	// Progress, if not nil, is told how many resamples are done.
	Progress func(done, total int)
}

// DefaultOptions are the defaults of every setting.
func DefaultOptions() Options {
	return Options{
		Replicates:    ReplicatesMeans,
		Sources:       SourcesOffsets,
		PrefactorBand: [2]float64{0, 1},
		Confidence:    0.95,
		Criterion:     "aicc",
		Resamples:     9999,
		Intervals:     []string{"bootstrap-t"},
		Seed:          1,
		EnergyUnit:    "kJ/mol",
	}
}

// How many draws of the nulls of tests there are: a fixed number, or fewer where p is
// plainly not small.
const (
	NullsFull       = "full"
	NullsSequential = "sequential"
)

// The values that settings of words can have, in the order of their help.
var (
	Criteria       = []string{"aicc", "aic", "bic"}
	EnergyUnits    = []string{"kJ/mol", "kcal/mol", "eV", "K", "cm^-1"}
	PublishStyles  = []string{"molar", "kelvin", "evaluated", "electronvolt"}
	ReplicatesWays = []string{ReplicatesMeans, ReplicatesIndependent}
	SourcesWays    = []string{SourcesOffsets, SourcesAsOne}
)

// Check refuses settings that mean nothing, before any data are read.
func (o *Options) Check() error {
	oneOf := func(what, got string, values []string) error {
		if got == "" || slices.Contains(values, got) {
			return nil
		}
		return fmt.Errorf("%s %q is not known; use one of %s", what, got, strings.Join(values, ", "))
	}
	var names []string
	for _, m := range fit.ErrorModels {
		names = append(names, string(m))
	}
	var schemes, methods []string
	for _, v := range bootstrap.Schemes {
		schemes = append(schemes, string(v))
	}
	for _, v := range bootstrap.Methods {
		methods = append(methods, string(v))
	}
	for _, m := range o.Intervals {
		if err := oneOf("interval", m, methods); err != nil {
			return err
		}
	}
	if _, err := ParseTolerance(o.Tolerance); err != nil {
		return err
	}
	if _, err := ParseThermometerError(o.ThermometerError); err != nil {
		return err
	}
	for _, err := range []error{
		oneOf("scheme", o.Scheme, schemes),
		oneOf("error model", string(o.ErrorModel), names),
		oneOf("replicates", o.Replicates, ReplicatesWays),
		oneOf("sources", o.Sources, SourcesWays),
		oneOf("criterion", o.Criterion, Criteria),
		oneOf("energy unit", o.EnergyUnit, EnergyUnits),
		oneOf("publish style", o.PublishStyle, PublishStyles),
	} {
		if err != nil {
			return err
		}
	}
	switch b := o.PrefactorBand; {
	case !(b[0] <= 0 && b[1] >= 0):
		return fmt.Errorf("prefactor band %g..%g must hold 0, the exponent of one Arrhenius barrier", b[0], b[1])
	case !(o.Confidence > 0.5 && o.Confidence < 1):
		return fmt.Errorf("confidence %g must lie between 0.5 and 1, such as 0.95", o.Confidence)
	case o.Resamples != 0 && o.Resamples < 99:
		return fmt.Errorf("%d resamples are too few; use 0 for none, or at least 99", o.Resamples)
	case o.Resamples > 10_000_000:
		return fmt.Errorf("%d resamples are too many; use at most 10000000", o.Resamples)
	case o.ReferenceTemperature < 0:
		return fmt.Errorf("reference temperature %g K must be positive", o.ReferenceTemperature)
	}
	return nil
}
