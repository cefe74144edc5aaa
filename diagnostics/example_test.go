package diagnostics_test

import (
	"context"
	"fmt"
	"log"
	"os"

	"onebarrier/diagnostics"
	"onebarrier/models/dataset"
)

// The main job from another program: read a table, assess its data set, look at
// the answer.
func ExampleAssess() {
	file, err := os.Open("../testdata/demo/ester-straight.csv")
	if err != nil {
		log.Fatal(err)
	}
	defer file.Close()
	sets, err := dataset.Read(file.Name(), file, dataset.Options{})
	if err != nil {
		log.Fatal(err) // every problem of the file, with line and column
	}
	a, err := diagnostics.Assess(context.Background(), sets[0], diagnostics.DefaultOptions())
	if err != nil {
		log.Fatal(err)
	}
	fmt.Println(a.Verdict.State, a.Verdict.RecommendedCurve)
	for _, f := range a.Findings {
		if f.Severity == diagnostics.Alarm {
			fmt.Println(f.Code, f.Message, f.Cure)
		}
	}
	// Output: straight-within straight
}
