package fit

import (
	"fmt"
	"math"
	"testing"

	"onebarrier/models/reference"
)

// Quantiles of Student's t against mpmath 1.3 with 30 digits: the root of
// betainc(nu/2, 1/2, 0, nu/(nu+t²), regularized=True)/2 = 1 - p; ν = 1 and 2 against
// their closed forms.
func TestStudentQuantile(t *testing.T) {
	for _, c := range []struct {
		nu      int
		p, want float64
	}{
		{1, 0.975, 1 / math.Tan(math.Pi*0.025)},
		{2, 0.975, 0.95 / math.Sqrt(2*0.975*0.025)},
		{2, 0.025, -0.95 / math.Sqrt(2*0.975*0.025)},
		{3, 0.975, 3.18244630528370959},
		{3, 0.995, 5.84090930973335726},
		{3, 0.6, 0.276670662332689911},
		{7, 0.975, 2.36462425159278534},
		{7, 0.995, 3.49948329735049392},
		{7, 0.6, 0.263166861352022812},
		{30, 0.975, 2.04227245630123831},
		{30, 0.995, 2.74999565356722533},
		{30, 0.6, 0.255605364951912772},
		{1000, 0.975, 1.96233908082640848},
		{1000, 0.995, 2.58075469806595108},
		{1000, 0.6, 0.253414515839498765},
	} {
		tol := 2e-14
		if c.nu > 30 {
			tol = 1e-12
		}
		for range 2 { // made, then remembered
			reference.Close(t, fmt.Sprintf("t(%g; %d)", c.p, c.nu), StudentQuantile(c.p, c.nu), c.want, tol)
		}
	}
	if q := StudentQuantile(0.5, 5); q != 0 {
		t.Errorf("median %g", q)
	}
}
