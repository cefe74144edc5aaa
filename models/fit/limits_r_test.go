package fit

import (
	"os"
	"os/exec"
	"slices"
	"strings"
	"testing"

	"onebarrier/models/reference"
)

// The same fit by survreg itself, where R is installed with its package survival.
// ONEBARRIER_REQUIRE=r makes their absence a failure.
func TestMotorettesRecomputed(t *testing.T) {
	const script = `library(survival)
d <- read.csv(file("stdin"))
m <- survreg(Surv(time, status) ~ I(1/(temp + 273.15)), d, dist = "lognormal", control = survreg.control(rel.tolerance = 1e-15))
cat(sprintf("%.17g", c(coef(m), m$scale, m$loglik[2], vcov(m)[2, 2])), sep = " ")`
	data, err := os.Open("../../testdata/published/opendata/imotor_survival.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer data.Close()
	var said strings.Builder
	r := exec.CommandContext(t.Context(), "Rscript", "--vanilla", "-e", script)
	r.Stdin, r.Stderr = data, &said
	out, err := r.Output()
	if err != nil {
		why := "R does not compute survreg (" + err.Error() + " " + strings.TrimSpace(said.String()) + "); it needs r-base-core and r-cran-survival"
		if slices.Contains(strings.Split(os.Getenv("ONEBARRIER_REQUIRE"), ","), "r") {
			t.Fatal(why)
		}
		t.Skip("NOT TESTED: " + why)
	}
	var want []float64
	for _, v := range strings.Fields(string(out)) {
		want = append(want, reference.Number(t, v))
	}
	if len(want) != 5 {
		t.Fatalf("R printed %q", out)
	}
	checkMotorettes(t, want)
}
