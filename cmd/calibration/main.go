// Command calibration measures the error rates of the verdict by simulation and
// writes them as Markdown tables, with a line for each target that says whether it
// is met:
//
//	go run ./cmd/calibration -sets 20000 > calibration.md
//
// The same sets and seed give the same tables, whatever the number of workers.
// Progress goes to standard error. It exits with 1 where a target is missed by more
// than three standard errors.
package main

import (
	"context"
	"flag"
	"fmt"
	"os"
	"os/signal"
	"runtime/debug"
	"strings"

	"onebarrier/diagnostics/calibration"
)

func main() {
	var set calibration.Settings
	flag.IntVar(&set.Sets, "sets", 20000, "data sets of each condition; dear ones get a part of them")
	flag.Uint64Var(&set.Seed, "seed", 1, "seed of the random streams")
	flag.IntVar(&set.Workers, "workers", 0, "goroutines, 0 for one a processor")
	only := flag.String("only", "", "only the tables whose title holds this text, such as findings")
	flag.Parse()
	study := calibration.New()
	study.Only(strings.ToLower(*only))
	if flag.NArg() > 0 || set.Sets < 100 || len(study.Sections) == 0 {
		fmt.Fprintln(os.Stderr, "usage: calibration [-sets N] [-seed S] [-workers W] [-only TEXT], with at least 100 sets; TEXT of a title")
		os.Exit(2)
	}
	debug.SetGCPercent(400) // small, short-lived data; memory stays below 300 MB
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt)
	defer stop()
	err := study.Run(ctx, set, func(done, total int) {
		fmt.Fprintf(os.Stderr, "\r%d of %d conditions", done, total)
	})
	fmt.Fprintln(os.Stderr)
	if err != nil {
		fmt.Fprintln(os.Stderr, err)
		os.Exit(1)
	}
	fmt.Printf("<!-- go run ./cmd/calibration -sets %d -seed %d -->\n\n", set.Sets, set.Seed)
	ok, err := study.Write(os.Stdout)
	if err != nil {
		fmt.Fprintln(os.Stderr, err)
		os.Exit(1)
	}
	if !ok {
		fmt.Fprintln(os.Stderr, "a target is missed: see the end of the tables")
		os.Exit(1)
	}
}
