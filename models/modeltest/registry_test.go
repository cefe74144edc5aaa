package modeltest_test

import (
	"testing"

	"onebarrier/models"
	"onebarrier/models/modeltest"
)

func TestRegisteredCurves(t *testing.T) {
	cases := modeltest.Registered()
	for _, c := range models.All() {
		name := c.Info().Name
		t.Run(name, func(t *testing.T) {
			cs, ok := cases[name]
			if !ok {
				t.Fatalf("no case: add what %q claims to be to Registered", name)
			}
			modeltest.Run(t, c, cs)
		})
		delete(cases, name)
	}
	for name := range cases {
		t.Errorf("a case is there for %q, which is not registered", name)
	}
}
