// Package validation checks the program against published and independently computed figures, in the place where it runs.
//
// A laboratory has to show that its software computes what it claims before relying on it. Run repeats the reference
// calculations on the files embedded from package testdata and gives one Check a figure: what was wanted, from which
// source, printed or computed, what came out, and within which tolerance. No figure is written in Go; a missing or broken
// file is a failed check, never a silent gap.
//
// Subjects outside this package hand their own groups to Run:
//
//	checks := validation.Run(ctx, validation.Group{Name: "run lengths", Checks: runLengthChecks})
package validation

import (
	"context"
	"fmt"
	"math"
)

// Check is one figure compared with its reference.
type Check struct {
	// Group is the subject, Name the figure within it, Source where the wanted value is published or how it was computed.
	Group, Name, Source string
	// Want is the reference. Printed says that it is a printed figure, else it is a computed one.
	Want    float64
	Printed bool
	// Got is what this program computes.
	Got float64
	// Tolerance is the largest absolute difference that passes.
	Tolerance float64
	Pass      bool
	// Note holds a known misprint, the rounding that the print used, or the error that kept the check from running.
	Note string
}

// Group is one subject of checks.
type Group struct {
	Name string
	// Checks gives the checks of the group. An error becomes a failed check beside those that were given.
	Checks func(context.Context) ([]Check, error)
}

// Groups are the built-in subjects in the order of the list.
func Groups() []Group {
	return []Group{
		{"chart factors, computed", computedFactors},
		{"chart factors, printed", printedFactors},
		{"worked examples", workedExamples},
		{"moments", certifiedMoments},
		{"limits of certified series", certifiedLimits},
	}
}

// Run runs the built-in groups and the further ones given, in this order. A cancelled context leaves the remaining groups
// as failed checks that say so. A group that gives no checks is itself a failure: nothing was shown.
func Run(ctx context.Context, further ...Group) []Check {
	var all []Check
	for _, g := range append(Groups(), further...) {
		if err := ctx.Err(); err != nil {
			all = append(all, failed(g.Name, fmt.Errorf("not run: %w", err)))
			continue
		}
		checks, err := g.Checks(ctx)
		for _, c := range checks {
			c.Group = g.Name
			all = append(all, c)
		}
		switch {
		case err != nil:
			all = append(all, failed(g.Name, err))
		case len(checks) == 0:
			all = append(all, failed(g.Name, fmt.Errorf("the group holds no checks")))
		}
	}
	return all
}

// Passed reports whether every check passed and there was at least one.
func Passed(checks []Check) bool {
	for _, c := range checks {
		if !c.Pass {
			return false
		}
	}
	return len(checks) > 0
}

// Compare fills in Got and Pass of a check whose reference and tolerance are set. A Got that is no number never passes.
func (c Check) Compare(got float64) Check {
	c.Got = got
	c.Pass = math.Abs(got-c.Want) <= c.Tolerance
	return c
}

func failed(group string, err error) Check {
	return Check{Group: group, Name: "could not be run", Note: err.Error()}
}
