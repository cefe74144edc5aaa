package figure

import (
	"context"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/recorder"

	"onebarrier/diagnostics"
	"onebarrier/models/dataset"
)

// reach is how far up and down something is drawn.
func reach(rec *recorder.Canvas) (low, high vg.Length) {
	low, high = 1e9, -1e9
	add := func(p vg.Path) {
		for _, c := range p {
			switch c.Type {
			case vg.ArcComp:
				low, high = min(low, c.Pos.Y-c.Radius), max(high, c.Pos.Y+c.Radius)
			case vg.MoveComp, vg.LineComp:
				low, high = min(low, c.Pos.Y), max(high, c.Pos.Y)
			}
		}
	}
	for _, a := range rec.Actions {
		switch a := a.(type) {
		case *recorder.Stroke:
			add(a.Path)
		case *recorder.Fill:
			add(a.Path)
		}
	}
	return low, high
}

// The arrow of a limit ends in its panel, and that of the legend in its row: less than
// half of what parts two rows stands out of it.
func TestArrowsKeepToTheirPlace(t *testing.T) {
	panel := vg.Rectangle{Min: vg.Point{X: 10, Y: 100}, Max: vg.Point{X: 90, Y: 200}}
	for _, c := range []struct {
		y      vg.Length
		up     bool
		length vg.Length // of the arrow
	}{{150, false, 12}, {105, false, 5}, {150, true, 12}, {193, true, 7}} {
		var rec recorder.Canvas
		canvas := draw.Canvas{Canvas: &rec, Rectangle: panel}
		arrow(&canvas, vg.Point{X: 50, Y: c.y}, c.up, 12)
		low, high := reach(&rec)
		got := high - c.y
		if !c.up {
			got = c.y - low
		}
		if got != c.length || low < panel.Min.Y || high > panel.Max.Y {
			t.Errorf("an arrow from %g, up %t, reaches from %g to %g, want %g long", c.y, c.up, low, high, c.length)
		}
	}
	var rec recorder.Canvas
	row := draw.Canvas{Canvas: &rec, Rectangle: vg.Rectangle{Min: vg.Point{Y: 20}, Max: vg.Point{X: 20, Y: 26.6}}}
	limitThumb(&row, row.Center())
	if low, high := reach(&rec); low < 20-legendPadding/2 || high > 26.6+legendPadding/2 || high-low < 6 {
		t.Errorf("the key of a limit reaches from %g to %g in a row from 20 to 26.6", low, high)
	}
}

// story assesses one of the invented data sets of testdata/demo.
func story(t *testing.T, name, extra string) *diagnostics.Assessment {
	t.Helper()
	b, err := os.ReadFile(filepath.Join("..", "..", "..", "testdata", "demo", name))
	if err != nil {
		t.Fatal(err)
	}
	sets, err := dataset.Read(name, strings.NewReader(string(b)+extra), dataset.Options{})
	if err != nil {
		t.Fatal(err)
	}
	o := diagnostics.DefaultOptions()
	o.Resamples = 0
	a, err := diagnostics.Assess(context.Background(), sets[0], o)
	if err != nil {
		t.Fatal(err)
	}
	return a
}

// Every figure says where what it shows is a mean, and what its small triangles are.
func TestLegendsSayWhatIsAMean(t *testing.T) {
	const (
		mean, ofSource   = "mean at one temperature", "mean, offset removed"
		curves, removed  = "curves: mean over the sources", "offsets between sources removed"
		of, neighbours   = "points are means of *n* repeats", "between neighbours, ±*u*"
		neighbouringMean = "between neighbouring means, ±*u*"
		beyondAxis       = "beyond the axis"
	)
	all := []string{mean, ofSource, curves, removed, of, neighbours, neighbouringMean, beyondAxis}
	repeats := story(t, "story-straight.csv", "")
	repeats.Columns = append(repeats.Columns, diagnostics.Column{Heading: "n", Role: "repeats"})
	for _, c := range []struct {
		name                     string
		a                        *diagnostics.Assessment
		arrhenius, ratio, energy []string
	}{
		{"straight", story(t, "story-straight.csv", ""), nil, nil, []string{neighbours}},
		{"thermostat", story(t, "story-thermostat.csv", ""), []string{mean}, []string{mean}, []string{neighbouringMean}},
		{"limits", story(t, "story-limits.csv", ""), nil, nil, []string{neighbours}},
		{"laboratories", story(t, "story-three-laboratories.csv", ""), []string{curves}, []string{curves}, []string{removed, neighbours}},
		{"repeats of a laboratory", story(t, "story-three-laboratories.csv", "5.0,1.18e-4,North\n"), []string{ofSource, curves}, []string{ofSource, curves}, []string{removed, neighbouringMean}},
		{"one temperature in two laboratories", story(t, "story-three-laboratories.csv", "17.0,2.52e-4,Middle\n"), []string{curves}, []string{curves}, []string{removed, neighbouringMean}},
		{"means of repeats", repeats, []string{of}, []string{of}, []string{neighbours}},
	} {
		ps, err := pictures(c.a, Options{})
		if err != nil {
			t.Fatal(err)
		}
		for figure, want := range map[string][]string{"arrhenius": c.arrhenius, "ratio": c.ratio, "activation-energy": c.energy} {
			p := ps[slices.IndexFunc(ps, func(p picture) bool { return p.name == figure })]
			var got []string
			for _, w := range all {
				if slices.ContainsFunc(p.legend, func(e legendEntry) bool { return e.words == w }) {
					got = append(got, w)
				}
			}
			if !slices.Equal(got, want) {
				t.Errorf("%s, %s: the legend says %q, want %q", c.name, figure, got, want)
			}
		}
	}
}
