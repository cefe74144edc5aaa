package cli

import (
	"errors"
	"fmt"
	"os"
	"strings"
	"syscall"

	"onebarrier/cmd/internal/report"
	"onebarrier/diagnostics"
	"onebarrier/models/dataset"
)

// The exit codes.
const (
	exitDone        = 0
	exitFailed      = 1
	exitUsage       = 2
	exitData        = 3
	exitPartial     = 4
	exitExpect      = 5
	exitInterrupted = 130
	exitTerminated  = 143
)

// usageError is wrong usage: it can be told without reading any data.
type usageError struct {
	message string
	cure    string
}

func (e *usageError) Error() string { return join(e.message, e.cure) }

func usagef(cure, format string, args ...any) error {
	return &usageError{fmt.Sprintf(format, args...), cure}
}

// partialError says that some of several inputs failed. Their problems have been
// reported.
type partialError struct {
	failed, all int
	what        string // files or sheets
}

func (e *partialError) Error() string {
	return fmt.Sprintf("%d of %d %s could not be used", e.failed, e.all, e.what)
}

// expectError says that the verdict is not one of those asked for.
type expectError struct {
	got  diagnostics.State
	want []string
}

func (e *expectError) Error() string {
	return fmt.Sprintf("the verdict is %s, expected %s", e.got, strings.Join(e.want, " or "))
}

// signalError says which signal ended the work.
type signalError struct{ signal os.Signal }

func (e *signalError) Error() string {
	if e.signal == syscall.SIGTERM {
		return "terminated"
	}
	return "interrupted"
}

// panicError is a panic that was caught: a fault of the program.
type panicError struct{ value any }

func (e *panicError) Error() string {
	return fmt.Sprintf("internal error: %v; please report it with the command and the data", e.value)
}

// exitCodes is the one table from error to exit code; the first match counts,
// and an error that matches none is a failure.
var exitCodes = []struct {
	code  int
	match func(error) bool
}{
	{exitTerminated, func(err error) bool {
		var e *signalError
		return errors.As(err, &e) && e.signal == syscall.SIGTERM
	}},
	{exitInterrupted, is[*signalError]},
	{exitFailed, is[*panicError]},
	{exitUsage, is[*usageError]},
	{exitData, is[dataset.Problems]},
	{exitPartial, is[*partialError]},
	{exitExpect, is[*expectError]},
}

func is[E error](err error) bool {
	var e E
	return errors.As(err, &e)
}

func exitCode(err error) int {
	if err == nil {
		return exitDone
	}
	for _, row := range exitCodes {
		if row.match(err) {
			return row.code
		}
	}
	return exitFailed
}

// problemsOf turns an error into the entries of a problems document.
func problemsOf(err error) []report.Problem {
	var data dataset.Problems
	var usage *usageError
	switch {
	case errors.As(err, &data):
		return report.DataProblems(data)
	case errors.As(err, &usage):
		return []report.Problem{{Code: "usage", Message: usage.message, Cure: usage.cure}}
	}
	return []report.Problem{{Code: "failed", Message: err.Error()}}
}

// wrapError lays an error out for a terminal: what is wrong, wrapped, and the cure
// below it.
func wrapError(err error, width int) []string {
	type part struct{ message, cure string }
	var parts []part
	var data dataset.Problems
	var usage *usageError
	switch {
	case errors.As(err, &data):
		const most = 20
		for i, p := range data {
			if i == most {
				parts = append(parts, part{message: fmt.Sprintf("and %d more", len(data)-most)})
				break
			}
			cure := p.Cure
			p.Cure = ""
			parts = append(parts, part{p.String(), cure})
		}
	case errors.As(err, &usage):
		parts = []part{{usage.message, usage.cure}}
	default:
		for _, l := range strings.Split(err.Error(), "\n") {
			parts = append(parts, part{message: l})
		}
	}
	var lines []string
	for _, p := range parts {
		for i, l := range report.Wrap("onebarrier: "+p.message, width-2) {
			if i > 0 {
				l = "  " + l
			}
			lines = append(lines, l)
		}
		for i, l := range report.Wrap(p.cure, width-4) {
			lines = append(lines, map[bool]string{true: "  → ", false: "    "}[i == 0]+l)
		}
	}
	return lines
}

func join(message, cure string) string {
	if cure == "" {
		return message
	}
	return message + "; " + cure
}
