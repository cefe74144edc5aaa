package figure

import (
	"bytes"
	"cmp"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"testing"

	"gonum.org/v1/plot"

	"onebarrier/models/reference"
)

// surveyOf invents n data sets of an archive: most are straight, some curve either way,
// some have wide intervals, some could not be used.
func surveyOf(n int) []SurveySet {
	rng := rand.New(rand.NewPCG(1, uint64(n)))
	var sets []SurveySet
	for i := range n {
		nan := math.NaN()
		s := SurveySet{Name: fmt.Sprintf("reaction_%d", i), Change: nan, Lower: nan, Upper: nan, P: nan}
		switch u := rng.Float64(); {
		case u < 0.05:
			s.ErrorCode = []string{"not-a-number", "dataset-scattered", "ambiguous-temperature"}[rng.IntN(3)]
		case u < 0.1:
			s.State = "untestable"
		default:
			half := 2 * math.Exp(0.8*rng.NormFloat64())
			truth := 0.0
			if u > 0.8 {
				truth = 60 * rng.NormFloat64()
			}
			s.Change = truth + half/2*rng.NormFloat64()
			s.Lower, s.Upper = s.Change-half, s.Change+half
			s.P = math.Erfc(math.Abs(s.Change) / (half / 2) / math.Sqrt2)
			switch {
			case s.P < 0.05 && half < 4:
				s.State = "beyond-prefactor"
			case s.P < 0.05:
				s.State = "curved-open"
			case math.Max(-s.Lower, s.Upper) < 3:
				s.State = "straight-within"
			default:
				s.State = "unresolved"
			}
		}
		sets = append(sets, s)
	}
	return sets
}

// What is drawn of few data sets, worked out by hand.
func TestSurveyData(t *testing.T) {
	nan := math.NaN()
	d, err := NewSurvey([]SurveySet{
		{Name: "up", State: "beyond-prefactor", Change: 8, Lower: 6, Upper: 10, P: 0.001},
		{Name: "none", State: "straight-within", Change: -0.5, Lower: -1.5, Upper: 0.5, P: 0.45},
		{Name: "few", State: "untestable", Change: nan, Lower: nan, Upper: nan, P: nan},
		{Name: "open", State: "unresolved", Change: -3, Lower: nan, Upper: 4, P: 0.05},
		{Name: "no interval", State: "unresolved", Change: 1, Lower: nan, Upper: nan, P: 1},
		{Name: "bad", ErrorCode: "not-a-number", Change: nan, Lower: nan, Upper: nan, P: nan},
		{Name: "worse", ErrorCode: "file-unreadable", Change: nan, Lower: nan, Upper: nan, P: nan},
		{Name: "bad too", ErrorCode: "not-a-number", Change: nan, Lower: nan, Upper: nan, P: nan},
	}, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	var bars, counts string
	for _, b := range d.Bars {
		bars += fmt.Sprintf("%s %s %g %g %g; ", b.Name, b.State, b.Change, b.Lower, b.Upper)
	}
	for _, c := range d.Counts {
		counts += fmt.Sprintf("%s %d %t; ", c.What, c.Sets, c.Failed)
	}
	if want := "open unresolved -3 -Inf 4; none straight-within -0.5 -1.5 0.5; no interval unresolved 1 NaN NaN; up beyond-prefactor 8 6 10; "; bars != want {
		t.Errorf("bars %s, want %s", bars, want)
	}
	if want := "untestable 1 false; beyond-prefactor 1 false; straight-within 1 false; unresolved 2 false; not-a-number 2 true; file-unreadable 1 true; "; counts != want {
		t.Errorf("counts %s, want %s", counts, want)
	}
	// 0.001 in the first bin, 0.05 in the second, 0.45 in the tenth, 1 in the last.
	if want := [surveyBins]int{0: 1, 1: 1, 9: 1, 19: 1}; d.P != want || d.Testable != 4 {
		t.Errorf("p-values %v, %d", d.P, d.Testable)
	}
	// Half-widths 2 and 1: twice their median is 3, and the next of 1, 2, 5 is 5.
	if d.Linear != 5 || d.Drawn != 4 || d.Sets != 8 || d.PerBar != 1 || d.Beyond != 0 {
		t.Errorf("linear to %g, %d of %d drawn, %d to a bar, %d beyond", d.Linear, d.Drawn, d.Sets, d.PerBar, d.Beyond)
	}
	if !(d.Low < -3 && d.Low > -5 && d.High > 10 && d.High < 14) {
		t.Errorf("axis from %g to %g", d.Low, d.High)
	}
}

// Of many data sets a bar stands for several, and their medians are drawn: here of
// 1000 sets with ΔE = 1 … 1000 and intervals ±10, but for one of ±10⁶.
func TestSurveyOfMany(t *testing.T) {
	var sets []SurveySet
	for i := 1000; i >= 1; i-- {
		half := 10.0
		if i == 500 {
			half = 1e6
		}
		state := "curved-open"
		if i%5 == 0 {
			state = "unresolved"
		}
		sets = append(sets, SurveySet{State: state, Change: float64(i), Lower: float64(i) - half, Upper: float64(i) + half, P: 0.5})
	}
	d, err := NewSurvey(sets, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	if d.PerBar != 5 || len(d.Bars) != 200 || d.Drawn != 1000 { // 1000/240 rounded up
		t.Fatalf("%d bars of %d for %d sets", len(d.Bars), d.PerBar, d.Drawn)
	}
	for i, b := range d.Bars {
		first := float64(5*i + 1)
		least, most := first-10, first+14
		if i == 99 {
			least, most = 500-1e6, 500+1e6
		}
		want := SurveyBar{State: "curved-open", Change: first + 2, Lower: first - 8, Upper: first + 12, Least: least, Most: most}
		if i == 99 { // 496 … 500: the lower ends are −999500, 486, 487, 488, 489
			want.Lower = 487
		}
		if b != want {
			t.Errorf("bar %d is %+v, want %+v", i, b, want)
		}
	}
	// The one wide interval does not flatten the others.
	if d.Beyond < 1 || d.High > 1300 || d.Low < -50 || d.Low > 0 {
		t.Errorf("axis from %g to %g, %d beyond", d.Low, d.High, d.Beyond)
	}
	if d.P[10] != 1000 {
		t.Errorf("p-values %v", d.P)
	}
}

func TestSurveyOfNothing(t *testing.T) {
	if _, err := NewSurvey(nil, 0.95); err == nil {
		t.Error("no data set is drawn")
	}
}

// More reasons than have room are summed up, and none is lost.
func TestSurveyReasons(t *testing.T) {
	var sets []SurveySet
	for i := range 28 {
		for range 28 - i {
			sets = append(sets, SurveySet{ErrorCode: fmt.Sprintf("code-%d", i)})
		}
	}
	d, err := NewSurvey(sets, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	last := d.Counts[len(d.Counts)-1]
	if len(d.Counts) != 25 || last.Sets != 4+3+2+1 || last.What != "4 more: survey status" {
		t.Errorf("%+v", d.Counts)
	}
}

// Of the false discovery rates those up to 0.05 count; unknown ones do not.
func TestSurveyFound(t *testing.T) {
	nan := math.NaN()
	d, err := NewSurvey([]SurveySet{
		{State: "unresolved", Q: 0.05, QBand: 0.051}, {State: "unresolved", Q: 0.2, QBand: 0.01},
		{State: "untestable", Q: nan, QBand: nan}, {State: "curved-open", Q: 0.01, QBand: 1}, {ErrorCode: "no-data"},
	}, 0.95)
	if err != nil || d.Found != 2 || d.FoundBand != 1 {
		t.Errorf("%+v, %v", d, err)
	}
}

// The axis: linear about 0, logarithmic far out; labels apart.
func TestSignedLog(t *testing.T) {
	s := signedLog{2}
	reference.Close(t, "end", s.inverse(s.of(-345)), -345, 1e-12)
	// asinh(1) = ln(1 + √2)
	reference.Close(t, "asinh 1", s.of(2), math.Log(1+math.Sqrt2), 1e-14)
	reference.Close(t, "middle", s.Normalize(-50, 50, 0), 0.5, 1e-14)
	for _, c := range [][3]float64{{2, -50, 50}, {10, -0.1, 1e6}, {1, -3, 0.5}, {1e-3, -1, 1}, {500, -20, 30}} {
		s := signedLog{c[0]}
		last, labels := math.Inf(-1), 0
		ticks := s.Ticks(c[1], c[2])
		slices.SortFunc(ticks, func(a, b plot.Tick) int { return cmp.Compare(a.Value, b.Value) })
		for _, k := range ticks {
			if k.Label == "" {
				continue
			}
			labels++
			at := s.Normalize(c[1], c[2], k.Value)
			if !(at >= -1e-9 && at <= 1+1e-9) || !(at-last > 0.99*tickGap) {
				t.Errorf("%v: label %s at %g after %g", c, k.Label, at, last)
			}
			last = at
		}
		if labels < 3 || labels > 10 {
			t.Errorf("%v: %d labels", c, labels)
		}
	}
}

// Every size is drawn in every format, the same bytes each time, without a panic.
func TestWriteSurvey(t *testing.T) {
	nan := math.NaN()
	cases := map[string][]SurveySet{
		"failed":     {{Name: "a", ErrorCode: "not-a-number", Change: nan, Lower: nan, Upper: nan, P: nan}},
		"untestable": {{Name: "a", State: "untestable", Change: nan, Lower: nan, Upper: nan, P: nan}},
		"alike":      {{Name: "*^{_", State: "unresolved", Change: 0, Lower: 0, Upper: 0, P: 0}, {Name: "a\x00\n", State: "later", Change: 0, Lower: nan, Upper: nan, P: 1}},
		"vast":       {{State: "unresolved", Change: 1e300, Lower: -1e308, Upper: math.Inf(1), P: 0.2}, {State: "unresolved", Change: 1e-300, Lower: -1e-300, Upper: 2e-300, P: 0.2}},
	}
	for _, n := range []int{1, 10, 40, 41, 150, 1000} {
		cases[fmt.Sprint(n)] = surveyOf(n)
	}
	for name, sets := range cases {
		for _, format := range []string{"svg", "pdf", "png"} {
			if format == "png" && name != "10" {
				continue // the slowest format, once
			}
			var files [][]byte
			for range 2 {
				d, err := NewSurvey(sets, 0.95)
				if err != nil {
					t.Fatal(err)
				}
				path, err := WriteSurvey(t.TempDir(), "results.sqlite", d, Options{Format: format})
				if err != nil {
					t.Fatalf("%s: %v", name, err)
				}
				b, err := os.ReadFile(path)
				if err != nil {
					t.Fatal(err)
				}
				if err := wellFormed(format, b); err != nil {
					t.Errorf("%s.%s: %v", name, format, err)
				}
				files = append(files, b)
			}
			if !bytes.Equal(files[0], files[1]) {
				t.Errorf("%s.%s: two drawings differ", name, format)
			}
		}
	}
	d, err := NewSurvey(surveyOf(3), 0.95)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := WriteSurvey(t.TempDir(), "", d, Options{Format: "bmp"}); err == nil {
		t.Error("format bmp is written")
	}
}
