// Speed times the work of one resample against its floor and against R and SciPy, in
// one run on the same data, and prints ratios: times of one machine mean little on
// another. R needs minpack.lm (Debian r-cran-minpack.lm), SciPy python3-scipy; what is
// missing is left out, and said.
//
//	go run ./cmd/speed
package main

import (
	"embed"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"time"

	"github.com/montanaflynn/stats"

	"onebarrier/models"
	"onebarrier/models/fit"
)

//go:embed refit.R refit.py
var scripts embed.FS

func main() {
	if err := run(os.Stdout); err != nil {
		fmt.Fprintln(os.Stderr, "speed:", err)
		os.Exit(1)
	}
}

// rivalResamples is how many resamples R and SciPy are given, ours how many we take.
const (
	rivalResamples = 2000
	ours           = 5000
)

func run(w io.Writer) error {
	fmt.Fprintln(w, "| N | work | µs a resample | times the floor | times ours |")
	fmt.Fprintln(w, "|---|---|---|---|---|")
	for _, n := range []int{10, 20} {
		if err := compare(w, n); err != nil {
			return err
		}
	}
	fmt.Fprintln(w, "\nfloor: one exp and one log1p at each of the N points; work: straight, power-prefactor and parallel refitted and ranked by AICc")
	return nil
}

// compare times one design: 280 to 460 K, two paths that cross in the middle, 3 % noise.
func compare(w io.Writer, n int) error {
	r := rand.New(rand.NewPCG(uint64(n), 1))
	t, k, v := make([]float64, n), make([]float64, n), make([]float64, n)
	for i := range n {
		t[i] = 280 + 180*float64(i)/float64(n-1)
		k[i] = math.Exp(-40e3/models.GasConstant*(1/t[i]-1./360)) + math.Exp(-90e3/models.GasConstant*(1/t[i]-1./360))
		k[i] *= math.Exp(0.03 * r.NormFloat64())
		v[i] = 1
	}
	s, err := fit.NewSample(fit.Relative, t, k, v)
	if err != nil {
		return err
	}
	curves := []models.Curve{models.Straight(), models.PowerPrefactor{}, models.Parallel{}}
	fits := make([]*fit.Result, len(curves))
	penalty := make([]float64, len(curves))
	for i, c := range curves {
		fits[i] = fit.Fit(s, c)
		penalty[i] = fits[i].AICc() + 2*fits[i].LogLik
	}
	parallel := fits[2]
	ys := make([][]float64, ours)
	for b := range ys {
		ys[b] = make([]float64, n)
		for i := range n {
			ys[b][i] = parallel.Fitted[i] + parallel.Sigma*r.NormFloat64()
		}
	}

	refit := fit.NewRefitter(s, curves, fits, fit.RefitOptions{Penalty: penalty})
	var out fit.Refit
	// In turn, many short runs: the least is what the code costs on a machine that
	// does other work too, the median of the pairwise ratios what can be compared.
	var refits, ratios stats.Float64Data
	for range 60 {
		f := timed(func() { timeFloor(ys) })
		r := timed(func() {
			for _, y := range ys {
				refit.Refit(y, &out)
			}
		})
		refits, ratios = append(refits, r), append(ratios, r/f)
	}
	perRefit, _ := refits.Min() // an error only where there are no values
	ratio, _ := ratios.Median()
	row := func(work string, micros float64) {
		fmt.Fprintf(w, "| %d | %s | %.3g | %.3g | %.3g |\n", n, work, micros, micros/perRefit*ratio, micros/perRefit)
	}
	row("floor", perRefit/ratio)
	row("onebarrier", perRefit)

	var total float64 // of the smallest RSS, for agreement
	for _, y := range ys[:rivalResamples] {
		refit.Refit(y, &out)
		total += min(out.RSS[0], out.RSS[1], out.RSS[2])
	}
	return rivals(w, s, parallel, ys[:rivalResamples], total, row)
}

// timed is the time of one run over all resamples in µs a resample.
func timed(f func()) float64 {
	start := time.Now()
	f()
	return float64(time.Since(start).Nanoseconds()) / 1000 / ours
}

func timeFloor(ys [][]float64) {
	var sum float64
	for _, y := range ys {
		for _, v := range y {
			sum += math.Log1p(math.Exp(v))
		}
	}
	runtime.KeepAlive(sum)
}

// rivals runs R and SciPy on the same resamples. Their smallest RSS, summed, must
// agree with ours to 1e-8, or the times compare different work.
func rivals(w io.Writer, s *fit.Sample, start *fit.Result, ys [][]float64, total float64, row func(string, float64)) error {
	dir, err := os.MkdirTemp("", "onebarrier-speed")
	if err != nil {
		return err
	}
	defer os.RemoveAll(dir)
	table := func(name, sep string, rows ...[]float64) (string, error) {
		var b strings.Builder
		for _, r := range rows {
			for i, v := range r {
				if i > 0 {
					b.WriteString(sep)
				}
				fmt.Fprintf(&b, "%.17g", v)
			}
			b.WriteString("\n")
		}
		path := filepath.Join(dir, name)
		return path, os.WriteFile(path, []byte(b.String()), 0o600)
	}
	temps, err := table("t.csv", "\n", s.T)
	if err != nil {
		return err
	}
	data, err := table("y.csv", ",", ys...)
	if err != nil {
		return err
	}
	from, err := table("start.csv", ",", append(append([]float64{}, start.P...), s.TRef))
	if err != nil {
		return err
	}
	for _, rival := range []struct {
		name, script string
		programs     []string // the first that works; Debian's packages serve Debian's own Python
	}{
		{"R (lm.fit, nls.lm)", "refit.R", []string{"Rscript"}},
		{"SciPy (lstsq, leastsq)", "refit.py", []string{"python3", "/usr/bin/python3"}},
	} {
		text, err := scripts.ReadFile(rival.script)
		if err != nil {
			return err
		}
		script := filepath.Join(dir, rival.script)
		if err := os.WriteFile(script, text, 0o600); err != nil {
			return err
		}
		var out []byte
		for _, program := range rival.programs {
			if out, err = exec.Command(program, script, temps, data, from).Output(); err == nil {
				break
			}
		}
		if err != nil {
			fmt.Fprintf(os.Stderr, "speed: %s is left out: %v\n", rival.name, err)
			continue
		}
		var micros, sum float64
		if _, err := fmt.Sscan(string(out), &micros, &sum); err != nil {
			return fmt.Errorf("%s printed %q: %w", rival.name, out, err)
		}
		if !(math.Abs(sum-total) <= 1e-8*total) {
			return fmt.Errorf("%s does other work: its smallest residual sums of squares add up to %.12g, ours to %.12g", rival.name, sum, total)
		}
		row(rival.name, micros)
	}
	return nil
}
