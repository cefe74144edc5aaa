package report

import (
	"testing"
)

// A factor that is a power of ten reads as one, whatever log10 makes of it.
func TestPowersOfTenRead(t *testing.T) {
	for x, want := range map[float64]string{
		1e-4: "10⁻⁴", 1e-3: "10⁻³", 1e-12: "10⁻¹²", 1e-15: "10⁻¹⁵", 1e5: "10⁵", 1e15: "10¹⁵", 1e23: "10²³", 0.25: "0.2500 ×", 60: "60.00 ×",
	} {
		if got := factor(x); got != want {
			t.Errorf("%g: %q, want %q", x, got, want)
		}
	}
}
