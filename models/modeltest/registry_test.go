package modeltest_test

import (
	"testing"

	"onebarrier/models"
	"onebarrier/models/modeltest"
)

func TestRegisteredCurves(t *testing.T) {
	for _, c := range models.All() {
		t.Run(c.Info().Name, func(t *testing.T) { modeltest.Run(t, c, modeltest.CaseOf(c)) })
	}
}
