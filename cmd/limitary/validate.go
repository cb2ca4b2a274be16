package main

import (
	"context"
	"encoding/json"
	"fmt"
	"runtime"
	"runtime/debug"
	"time"

	"google.golang.org/protobuf/encoding/protojson"
	"google.golang.org/protobuf/proto"

	pb "limitary/api/limitary/v1"
	"limitary/internal/report"
	"limitary/internal/rules"
	"limitary/internal/validation"
	"limitary/service"
)

const validateAbout = `Runs the published examples that are built into the program and prints a dated pass list: for each figure what was
wanted, whether that is a printed or a computed value, what this program gives, and the largest difference that passes.
Keep the list with the records of the installation.

It ends with 0 where every check passed, with 1 where one failed, and with 2 where it was called wrongly.`

func runValidate(ctx context.Context, env *environment, args []string) int {
	f := newFlags(env, "validate [flags]", validateAbout)
	asJSON := f.Bool("json", false, "print the list as JSON")
	if _, code, done := f.parse(args, 0, 0); done {
		return code
	}
	return validateWith(ctx, env, *asJSON, validation.Signals(), contractGroup())
}

// validateWith runs the built-in checks and further ones.
func validateWith(ctx context.Context, env *environment, asJSON bool, further ...validation.Group) int {
	list := report.PassList{
		At: env.Now().UTC(), Program: programNumber(), Judge: rules.JudgeNumber,
		Platform: runtime.GOOS + "/" + runtime.GOARCH + ", " + runtime.Version(),
		Checks:   validation.Run(ctx, further...),
	}
	var err error
	if asJSON {
		err = writePassList(env, list)
	} else {
		err = report.Validation(env.Stdout, list)
	}
	if err != nil {
		return fail(env, "%v", err)
	}
	if !validation.Passed(list.Checks) {
		failed := 0
		for _, c := range list.Checks {
			if !c.Pass {
				failed++
			}
		}
		return fail(env, "%d of %d checks failed; do not rely on this program here", failed, len(list.Checks))
	}
	return exitOK
}

// passListJSON is the list for programs. No service answers with it, so it has no message of its own.
type passListJSON struct {
	At       time.Time   `json:"at"`
	Program  string      `json:"program"`
	Judge    int         `json:"judge"`
	Platform string      `json:"platform"`
	Passed   bool        `json:"passed"`
	Checks   []checkJSON `json:"checks"`
}

type checkJSON struct {
	Group     string   `json:"group"`
	Name      string   `json:"name"`
	Source    string   `json:"source"`
	Printed   bool     `json:"printed"`
	Want      float64  `json:"want"`
	Got       *float64 `json:"got"` // null where nothing, or no number, came out
	Tolerance float64  `json:"tolerance"`
	Passed    bool     `json:"passed"`
	Note      string   `json:"note,omitempty"`
}

func writePassList(env *environment, list report.PassList) error {
	out := passListJSON{At: list.At, Program: list.Program, Judge: list.Judge, Platform: list.Platform,
		Passed: validation.Passed(list.Checks), Checks: []checkJSON{}}
	for _, c := range list.Checks {
		each := checkJSON{Group: c.Group, Name: c.Name, Source: c.Source, Printed: c.Printed, Want: c.Want, Tolerance: c.Tolerance, Passed: c.Pass, Note: c.Note}
		if got := c.Got; got-got == 0 {
			each.Got = &got
		}
		out.Checks = append(out.Checks, each)
	}
	enc := json.NewEncoder(env.Stdout)
	enc.SetIndent("", "  ")
	return enc.Encode(out)
}

// contractGroup checks the example of the contract's description through the service's own method: what callers of the
// service get is what this list vouches for.
func contractGroup() validation.Group {
	return validation.Group{Name: "evaluation by the service's contract", Checks: contractChecks}
}

// contractExample is two evaluations whose hits follow from the rules by hand: 13.4 lies 3.4 sigma above 10, and 2.1 and
// 2.9 lie beyond 2 and 2.4 sigma above 0, while the break keeps the last value from continuing anything.
const contractExample = `{"evaluations": [
  {"inline": {"location": {"centre": 10, "sigma": 1, "ruleSet": "nelson-1984"}}, "series": {"values": [10.2, "NaN", 13.4]}},
  {"inline": {"location": {"centre": 0, "sigma": 1, "rules": [{"id": "a", "consequence": "CONSEQUENCE_ACT", "beyond": {"k": 2, "m": 3, "z": 2}}]}},
   "points": {"points": [{"statistic": 0}, {"statistic": 2.1}, {"statistic": 2.9, "sigma": 1.2}, {"statistic": 1, "breakBefore": true}]}}]}`

const contractAnswer = `{"evaluations": [
  {"hits": [{"point": 2, "trace": "TRACE_ROLE_LOCATION", "rule": "nelson-1984/1", "side": "SIDE_UPPER", "windowFirst": 2, "firstCounting": 2, "consequence": "CONSEQUENCE_STOP"}],
   "standing": "STANDING_STOP", "pointsJudged": 2},
  {"hits": [{"point": 2, "trace": "TRACE_ROLE_LOCATION", "rule": "a", "side": "SIDE_UPPER", "windowFirst": 0, "firstCounting": 1, "consequence": "CONSEQUENCE_ACT"}],
   "standing": "STANDING_ACT", "pointsJudged": 4}]}`

func contractChecks(ctx context.Context) ([]validation.Check, error) {
	var ask pb.EvaluateBatchRequest
	var want pb.EvaluateBatchResponse
	if err := protojson.Unmarshal([]byte(contractExample), &ask); err != nil {
		return nil, err
	}
	if err := protojson.Unmarshal([]byte(contractAnswer), &want); err != nil {
		return nil, err
	}
	got, err := (&service.EvaluationService{}).EvaluateBatch(ctx, &ask)
	if err != nil {
		return nil, err
	}
	var checks []validation.Check
	for i, w := range want.Evaluations {
		same := 0.0
		if i < len(got.Evaluations) && proto.Equal(w, got.Evaluations[i]) {
			same = 1
		}
		checks = append(checks, validation.Check{Name: fmt.Sprintf("answer %d is the one described", i+1), Source: "the contract's description, by hand", Want: 1}.Compare(same))
	}
	return checks, nil
}

// programNumber is the version the program was built from.
func programNumber() string {
	if info, ok := debug.ReadBuildInfo(); ok && info.Main.Version != "" {
		return info.Main.Version
	}
	return "(devel)"
}
