package calibration

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strings"

	"onebarrier/models/fit"

	"gonum.org/v1/gonum/stat"
)

// Temperatures are the numbers of temperatures of the study.
var Temperatures = []int{4, 5, 6, 8, 12, 20}

// Target is what a row of figures must not leave, in per cent.
type Target struct{ Low, High float64 }

// The targets.
var (
	exact         = &Target{4.5, 5.5}
	targetStated  = &Target{0, 5.5}
	targetInK     = &Target{0, 6}
	targetBeyond  = &Target{0, 5}
	fewNamed      = &Target{0, 25}
	mostNamed     = &Target{60, 100}
	resampleCount = 999
)

func (t Target) String() string {
	switch {
	case t.Low == 0:
		return fmt.Sprintf("≤ %g", t.High)
	case t.High == 100:
		return fmt.Sprintf("≥ %g", t.Low)
	}
	return fmt.Sprintf("%g ± %g", (t.Low+t.High)/2, (t.High-t.Low)/2)
}

// Row is one line of a table: a rate at each number of temperatures.
type Row struct {
	Label   string
	Target  *Target // nil: printed only
	Figures []Figure

	jobs  []*job
	needs []*job // of other rows' conditions, that value reads
	value func(*Counts) Figure
	part  bool // a share of few data sets by its nature
}

// Section is one table of the study.
type Section struct {
	Title, Note string
	Rows        []*Row
}

// job is a cell to simulate, with the divisor of the number of sets it gets.
type job struct {
	cell   Cell
	share  int
	events []Event
	counts *Counts
}

// Study is the whole calibration study.
type Study struct {
	Sections []*Section
	jobs     []*job
	byName   map[string]*job
}

// New lays the study out.
func New() *Study {
	s := &Study{byName: map[string]*job{}}
	s.falseAlarms()
	s.limits()
	s.detection()
	s.deciding()
	s.repeats()
	s.sources()
	s.beyond()
	s.criteria()
	s.errorModels()
	s.exponents()
	s.twoPaths()
	s.falling()
	s.coverage()
	s.published()
	s.shares()
	s.findings()
	return s
}

// Only keeps the sections whose title holds a text, in lower case.
func (s *Study) Only(text string) {
	s.Sections = slices.DeleteFunc(s.Sections, func(sec *Section) bool {
		return !strings.Contains(strings.ToLower(sec.Title), text)
	})
	asked := map[*job]bool{}
	for _, sec := range s.Sections {
		for _, r := range sec.Rows {
			for _, j := range slices.Concat(r.jobs, r.needs) {
				asked[j] = true
			}
		}
	}
	s.jobs = slices.DeleteFunc(s.jobs, func(j *job) bool { return !asked[j] })
}

// section starts a table.
func (s *Study) section(title, note string) {
	s.Sections = append(s.Sections, &Section{Title: title, Note: note})
}

// job returns the job of a cell, a new one if no row asked for it yet.
func (s *Study) job(c Cell, share int) *job {
	name := fmt.Sprint(share, c.name())
	j, ok := s.byName[name]
	if !ok {
		j = &job{cell: c, share: share}
		s.byName[name] = j
		s.jobs = append(s.jobs, j)
	}
	return j
}

// row adds a row to the last section: one event of the same condition at each
// number of temperatures.
func (s *Study) row(label string, c Cell, share int, e Event, target *Target) {
	s.custom(label, c, share, target, e, func(n *Counts) Figure { return n.Rate(e) })
}

// custom adds a row of another value; e is an event that it needs.
func (s *Study) custom(label string, c Cell, share int, target *Target, e Event, value func(*Counts) Figure) {
	r := &Row{Label: label, Target: target, value: value}
	for _, n := range Temperatures {
		c.N = n
		j := s.job(c, share)
		j.events = append(j.events, e)
		r.jobs = append(r.jobs, j)
	}
	last := s.Sections[len(s.Sections)-1]
	last.Rows = append(last.Rows, r)
}

// last is the row added last.
func (s *Study) last() *Row {
	rows := s.Sections[len(s.Sections)-1].Rows
	return rows[len(rows)-1]
}

// Sets of the dearer cells, as divisors of those of the study.
const (
	all           = 1
	someForPower  = 5
	someInK       = 2
	fewInK        = 4
	someResampled = 5
	someCompared  = 20
	fewShares     = 100
)

var ranges = []Range{Narrow, Wide}

// The conditions on which most rows are built.
func relative(r Range) Cell { return Cell{Range: r} }
func stated(r Range) Cell   { return Cell{Range: r, Uneven: true, Stated: 1} }
func tooSmall(r Range) Cell { return Cell{Range: r, Uneven: true, Stated: 1 / 1.5} }
func scaled(r Range) Cell {
	return Cell{Range: r, Uneven: true, Stated: 1 / 1.5, Model: fit.Scaled, Lean: true}
}
func absolute(r Range) Cell {
	return Cell{Range: r, Absolute: true, Model: fit.Absolute, Lean: true}
}

func (s *Study) falseAlarms() {
	s.section("False alarms of the verdict",
		"One barrier; share of curved verdicts among data sets that can be tested, in per cent.")
	for _, r := range ranges {
		label := func(what string) string { return what + ", " + r.String() }
		s.row(label("relative"), relative(r), all, Curved, exact)
		s.row(label("scaled"), scaled(r), all, Curved, exact)
		s.row(label("stated, u right"), stated(r), all, Curved, targetStated)
		s.row(label("stated, u 1.5 times too small"), tooSmall(r), all, Curved, nil)
		s.row(label("— of these taken as scaled"), tooSmall(r), all, Rescaled, nil)
		s.row(label("absolute"), absolute(r), someInK, Curved, targetInK)
		s.row(label("— untestable"), absolute(r), someInK, IsUntestable, nil)
		s.row(label("— Wald interval in place of the profile"), absolute(r), someInK, WaldCurved, nil)
		s.row(label("second-barrier test alone, relative"), relative(r), all, SecondBarrier, nil)
		s.row(label("verdict or second-barrier finding, relative"), relative(r), all, Either, nil)
	}
}

func (s *Study) limits() {
	s.section("Errors that are not normal",
		"One barrier, error model relative; share of curved verdicts in per cent. Outliers: one point in twenty has a log-normal error of five standard deviations more.")
	for _, r := range ranges {
		for _, v := range []struct {
			name  string
			shape Shape
		}{{"Student's t with 3 degrees of freedom", Student3}, {"outliers", Outliers}} {
			c := relative(r)
			c.Shape, c.Lean = v.shape, true
			s.row(v.name+", "+r.String(), c, all, Curved, nil)
			s.row("— verdict or second-barrier finding, "+r.String(), c, all, Either, nil)
		}
	}
}

func (s *Study) detection() {
	s.section("Points below a detection limit",
		"One barrier, error model relative; k is not detected in the coldest fifth of the range, and N counts all points. Share of curved verdicts among data sets that can be tested, in per cent, by what is done about it.")
	for _, r := range ranges {
		for _, v := range []struct {
			name  string
			taken Limits
		}{{"as limits", AsLimits}, {"left out", LeftOut}, {"half of the limit taken as measured", HalfTaken}, {"the limit taken as measured", LimitsTaken}} {
			c := relative(r)
			c.Limits, c.Lean = v.taken, true
			s.row(v.name+", "+r.String(), c, someForPower, Curved, nil)
		}
	}
}

func (s *Study) deciding() {
	s.section("Deciding points",
		"Error model relative; share of data sets for which a deciding point is named, in per cent: of those with one barrier that came out curved by chance with p from 0.01, and of those that are curved because the hottest point reads eight standard deviations too high. With few temperatures, and over a wide range, such a point seldom bends the plot, and where it does too little is left without it to tell.")
	for _, r := range ranges {
		s.row("one barrier, curved by chance, "+r.String(), relative(r), all, DecidingNear, fewNamed)
		s.last().part = true
		bad := relative(r)
		bad.Shape, bad.Lean = BadHot, true
		enough := 8
		if r == Wide {
			enough = 12
		}
		for _, v := range []struct {
			name   string
			few    bool
			target *Target
		}{{"N ≥", false, mostNamed}, {"N <", true, nil}} {
			s.custom(fmt.Sprintf("bent by one bad hot point, %s %d, %s", v.name, enough, r), bad, all, v.target, Deciding, func(n *Counts) Figure {
				if v.few != (n.N < enough) {
					return rate(0, 0)
				}
				return n.Rate(Deciding)
			})
			s.last().part = true
		}
		s.row("— curved verdicts with that point, "+r.String(), bad, all, Curved, nil)
	}
}

func (s *Study) repeats() {
	s.section("Repeats at one temperature",
		"One barrier, error model relative, three repeats of each temperature; share of curved verdicts in per cent. A shared thermostat error is as large as the scatter of the repeats.")
	for _, r := range ranges {
		for _, shared := range []bool{false, true} {
			c := Cell{Range: r, Repeats: Triplets, Thermostat: shared, Lean: true}
			name := "errors independent"
			if shared {
				name = "shared thermostat error"
			}
			s.row(name+", on means, "+r.String(), c, all, Curved, exact)
			s.row(name+", on single points, "+r.String(), c, all, Pointwise, nil)
		}
		s.row("1 to 4 repeats, shared thermostat error, on means, "+r.String(),
			Cell{Range: r, Repeats: OneToFour, Thermostat: true, Lean: true}, all, Curved, nil)
	}
}

func (s *Study) beyond() {
	s.section("Beyond the prefactor, wrongly",
		"One barrier with a prefactor that goes as T to the power n; share of beyond-prefactor in per cent.")
	for _, r := range ranges {
		for _, n := range []float64{0.5, 1} {
			for _, v := range []struct {
				name  string
				cell  Cell
				share int
			}{{"relative", relative(r), all}, {"scaled", scaled(r), all}, {"stated, u right", stated(r), all}, {"absolute", absolute(r), fewInK}} {
				c := v.cell
				c.Truth.Exponent = n
				if c.Stated != 1 {
					c.Lean = true
				}
				s.row(fmt.Sprintf("n = %g, %s, %s", n, v.name, r), c, v.share, Beyond, targetBeyond)
			}
		}
	}
}

func (s *Study) criteria() {
	s.section("What a criterion alone would have said",
		"One barrier, error model relative; share of data sets in which the curve with the lowest value is not of the family of fixed exponents, in per cent.")
	for _, r := range ranges {
		s.row("AIC, "+r.String(), relative(r), all, BestAIC, nil)
		s.row("AICc, "+r.String(), relative(r), all, BestAICc, nil)
		s.row("BIC, "+r.String(), relative(r), all, BestBIC, nil)
		every := relative(r)
		every.Every = true
		s.row("AIC among every curve of the catalogue, "+r.String(), every, all, BestAIC, nil)
		s.row("AICc among every curve of the catalogue, "+r.String(), every, all, BestAICc, nil)
	}
}

func (s *Study) errorModels() {
	s.section("Which error model the data have",
		"Share of data sets in which AICc of the line prefers the right one of relative and absolute, in per cent. It must not change with the unit of k.")
	for _, inK := range []bool{false, true} {
		for _, level := range []float64{-15, 15} {
			name := "relative"
			if inK {
				name = "absolute"
			}
			s.row(fmt.Sprintf("errors %s, k of about 10^%.0f, %s", name, (middleLnK+level)/math.Ln10, Narrow),
				Cell{Range: Narrow, Truth: Truth{Level: level}, Absolute: inK, Lean: true, Compare: true}, someCompared, TrueErrorModel, nil)
		}
	}
}

// exponentsOf are the exponents of the power rows: changes of E of 5, 10 and 20
// kJ/mol over the narrow range, and of 6, 12 and 25 over the wide one.
func exponentsOf(r Range) []float64 {
	if r == Narrow {
		return []float64{10, 20, 40}
	}
	return []float64{1, 2, 4}
}

func (s *Study) exponents() {
	s.section("Power against an exponent of T",
		"Error model relative; share of curved verdicts in per cent.")
	for _, r := range ranges {
		for _, n := range exponentsOf(r) {
			c := relative(r)
			c.Truth.Exponent, c.Lean = n, true
			s.row(fmt.Sprintf("n = %g, %s", n, r), c, someForPower, Curved, nil)
		}
	}
}

func (s *Study) twoPaths() {
	s.section("Power against a second path",
		"Two parallel barriers, error model relative; share in per cent of curved verdicts, of second-barrier findings, of either, and of rejections by a likelihood-ratio test whose critical value was simulated for the same temperatures and noise. Crossovers are counted from the hot end, in 1/T.")
	for _, r := range ranges {
		for _, step := range []float64{1.5, 8} {
			for _, x := range []float64{0.08, 0.2, 0.5, 0.8} {
				c := relative(r)
				c.Truth.Step, c.Truth.Crossover = step, x
				difference := step / (inverse(r.Low) - inverse(r.High))
				label := func(what string) string {
					return fmt.Sprintf("ΔE = %.0f kJ/mol, crossover %g %%, %s: %s", difference, 100*x, r, what)
				}
				s.row(label("verdict"), c, someForPower, Curved, nil)
				s.row(label("second-barrier test"), c, someForPower, SecondBarrier, nil)
				s.row(label("either"), c, someForPower, Either, nil)
				s.likelihoodRatio(label("calibrated likelihood ratio"), c)
			}
		}
	}
}

// likelihoodRatio adds the power of the calibrated test: its critical value is the
// 95 % point of the statistic on straight data of the same design.
func (s *Study) likelihoodRatio(label string, c Cell) {
	null := map[int]*job{}
	for _, n := range Temperatures {
		straight := relative(c.Range)
		straight.N = n
		null[n] = s.job(straight, all)
	}
	s.custom(label, c, someForPower, nil, Curved, func(n *Counts) Figure {
		sorted := slices.Clone(null[n.N].counts.Ratio)
		if len(sorted) == 0 || slices.ContainsFunc(sorted, math.IsNaN) {
			return rate(0, 0)
		}
		slices.Sort(sorted)
		critical := sorted[min(len(sorted)-1, int(math.Ceil(0.95*float64(len(sorted))))-1)]
		hits := 0
		for _, v := range n.Ratio {
			if v > critical {
				hits++
			}
		}
		return rate(hits, len(n.Ratio))
	})
	for _, n := range Temperatures {
		s.last().needs = append(s.last().needs, null[n])
	}
}

func (s *Study) falling() {
	s.section("Power where E falls, stated uncertainties",
		"Error model chosen by the data, u right; share in per cent of curved verdicts, and of data sets whose stated uncertainties were taken as contradicted.")
	for _, r := range ranges {
		for _, n := range exponentsOf(r)[1:] {
			c := stated(r)
			c.Truth.Exponent = -n
			s.row(fmt.Sprintf("n = −%g, %s: verdict", n, r), c, someForPower, Curved, nil)
			s.row(fmt.Sprintf("n = −%g, %s: taken as scaled", n, r), c, someForPower, Rescaled, nil)
		}
		for _, step := range []float64{1.5, 8} {
			c := stated(r)
			c.Truth.Step, c.Truth.Crossover = -step, 0.5
			difference := step / (inverse(r.Low) - inverse(r.High))
			label := fmt.Sprintf("two steps in series, ΔE = %.0f kJ/mol, crossover in the middle, %s: ", difference, r)
			s.row(label+"verdict", c, someForPower, Curved, nil)
			s.row(label+"taken as scaled", c, someForPower, Rescaled, nil)
		}
	}
}

func (s *Study) coverage() {
	s.section("Coverage of intervals",
		fmt.Sprintf("One barrier; share of 95 %% intervals that hold the truth, in per cent. %d resamples; default scheme. With errors in ln k the profile interval is that of t. ΔE is n times a constant, and so are the ends of its intervals.", resampleCount))
	for _, v := range []struct {
		name string
		cell Cell
	}{
		{"relative, " + Narrow.String(), relative(Narrow)},
		{"relative, " + Wide.String(), relative(Wide)},
		{"stated, u right, " + Narrow.String(), stated(Narrow)},
	} {
		c := v.cell
		c.Resamples = resampleCount
		c.Lean = c.Stated == 0
		for _, e := range []struct {
			name string
			e    Event
		}{
			{"E, t", CoverE}, {"E, bootstrap-t", BootstrapTE}, {"E, percentile", PercentileE}, {"E, BCa", BCaE},
			{"n and ΔE, t", CoverN}, {"n and ΔE, bootstrap-t", BootstrapTN}, {"n and ΔE, percentile", PercentileN}, {"n and ΔE, BCa", BCaN},
		} {
			s.row(v.name+": "+e.name, c, someResampled, e.e, nil)
		}
	}
	for _, r := range ranges {
		c := absolute(r)
		for _, e := range []struct {
			name string
			e    Event
		}{{"E, t", CoverE}, {"E, profile", CoverProfileE}, {"n and ΔE, t", CoverWaldN}, {"n and ΔE, profile", CoverN}} {
			s.row("absolute, "+r.String()+": "+e.name, c, someInK, e.e, nil)
		}
	}
}

func (s *Study) published() {
	s.section("E and its temperature",
		"Data with an exponent of T, error model relative; share of 95 % intervals that hold the local activation energy, in per cent.")
	for _, r := range ranges {
		n := exponentsOf(r)[1]
		c := relative(r)
		c.Truth.Exponent, c.Lean = n, true
		for _, e := range []struct {
			name string
			e    Event
		}{
			{"E of the line at T_eff", CoverE}, {"E of the line taken for T_min", CoverEMin}, {"E of the line taken for T_max", CoverEMax},
			{"E_loc of power-prefactor at T_min", CoverLocMin}, {"E_loc of power-prefactor at T_max", CoverLocMax},
		} {
			s.row(fmt.Sprintf("n = %g, %s: %s", n, r, e.name), c, someForPower, e.e, nil)
		}
	}
}

func (s *Study) shares() {
	s.section("Repeat shares on straight data",
		fmt.Sprintf("One barrier, error model relative, the whole of Assess with %d resamples; mean over the data sets that have the share, in per cent, with its standard error.", shareResamples))
	c := Cell{Range: Narrow, Shares: true}
	for _, v := range []struct {
		name string
		of   func(Shares) float64
	}{
		{"curved verdicts", func(sh Shares) float64 { return sh.Curved }},
		{"first place of power", func(sh Shares) float64 { return sh.Power }},
		{"first place of parallel", func(sh Shares) float64 { return sh.Parallel }},
	} {
		s.custom(v.name+", "+Narrow.String(), c, fewShares, nil, Curved, func(n *Counts) Figure { return mean(n.Shares, v.of) })
	}
}

// mean is the mean of a share over the data sets that have one, with its standard error.
func mean(shares []Shares, of func(Shares) float64) Figure {
	var known []float64
	for _, sh := range shares {
		if v := of(sh); !math.IsNaN(v) {
			known = append(known, v)
		}
	}
	m, sd := stat.MeanStdDev(known, nil)
	return Figure{m, sd / math.Sqrt(float64(len(known))), len(known)}
}

// Run simulates every cell and fills the figures in. progress, if not nil, is told
// how many cells are done.
func (s *Study) Run(ctx context.Context, set Settings, progress func(done, total int)) error {
	for i, j := range s.jobs {
		own := set
		own.Sets, own.Events = max(2, set.Sets/j.share), j.events
		n, err := j.cell.Run(ctx, own)
		if err != nil {
			return fmt.Errorf("calibration: %s: %w", j.cell.name(), err)
		}
		j.counts = n
		if progress != nil {
			progress(i+1, len(s.jobs))
		}
	}
	for _, sec := range s.Sections {
		for _, r := range sec.Rows {
			r.Figures = nil
			for _, j := range r.jobs {
				r.Figures = append(r.Figures, r.value(j.counts))
			}
		}
	}
	return nil
}
