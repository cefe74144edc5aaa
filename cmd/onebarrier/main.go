// Command onebarrier tells whether rate constants at several temperatures have
// one barrier.
package main

import (
	"context"
	"os"

	"onebarrier/cmd/internal/cli"
)

func main() {
	os.Exit(cli.Main(context.Background(), os.Args[1:], os.Stdin, os.Stdout, os.Stderr))
}
