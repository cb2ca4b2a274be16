package service

import (
	"context"
	"runtime"

	"google.golang.org/grpc/codes"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
	"limitary/internal/rules"
	"limitary/internal/runlength"
	"limitary/internal/runlength/effort"
)

const (
	// RunLengthUnitsMax bounds the work of one RunLength of the service, in operations: ten seconds or so of a processor.
	RunLengthUnitsMax = 10_000_000_000
	// RunLengthWaitingMax bounds the calls that wait for their turn.
	RunLengthWaitingMax = 16
)

// runLengthTurns and runLengthQueue keep long computations from taking the processors that judging needs: half of them,
// at least one, compute at a time.
var (
	runLengthTurns = make(chan struct{}, max(1, runtime.GOMAXPROCS(0)/2))
	runLengthQueue = make(chan struct{}, RunLengthWaitingMax+cap(runLengthTurns))
)

// RunLength tells what rules cost and what they catch. It waits for its turn, and ends with its context.
func (*RuleService) RunLength(ctx context.Context, in *pb.RunLengthRequest) (*pb.RunLengthResponse, error) {
	question, err := runLengthFromProto(in)
	if err != nil {
		return nil, err
	}
	select {
	case runLengthQueue <- struct{}{}:
		defer func() { <-runLengthQueue }()
	default:
		return nil, withInfo(codes.ResourceExhausted, "as many run lengths wait already as may; repeating this one later is safe", definition.Unavailable, "").Err()
	}
	select {
	case runLengthTurns <- struct{}{}:
		defer func() { <-runLengthTurns }()
	case <-ctx.Done():
		return nil, ctx.Err()
	}
	result, err := question.answer(effort.New(ctx, RunLengthUnitsMax), nil)
	if err != nil {
		return nil, err
	}
	return result.Message, nil
}

// RunLengthResult is an answer of RunLength, and what was computed for it.
type RunLengthResult struct {
	Message *pb.RunLengthResponse
	Answer  *runlength.Answer
	// Request is the question as it was understood.
	Request runlength.Request
}

// AnswerRunLength answers as the service does, within the limit of a meter, for commands that need no service. Progress,
// where set, is told what is being done and how much of it is.
func AnswerRunLength(meter *effort.Meter, in *pb.RunLengthRequest, progress func(what string, done, of int)) (*RunLengthResult, error) {
	question, err := runLengthFromProto(in)
	if err != nil {
		return nil, err
	}
	return question.answer(meter, progress)
}

// runLengthQuestion is a request in the domain's words.
type runLengthQuestion struct {
	request  runlength.Request
	rates    bool
	marginal bool
	choice   *runlength.ChoiceRequest
	real     *runlength.RealisedRequest
	workload *pb.WorkloadRequest
	// plain says that the rules came without a trace, which paths in errors then do not name.
	plain bool
}

// answer computes everything asked for.
func (q *runLengthQuestion) answer(meter *effort.Meter, progress func(string, int, int)) (*RunLengthResult, error) {
	if progress == nil {
		progress = func(string, int, int) {}
	}
	out := &pb.RunLengthResponse{Judge: rules.JudgeNumber, ShiftUnit: pb.ShiftUnit(q.request.ShiftUnit) + pb.ShiftUnit_SHIFT_UNIT_STANDARD_ERRORS}
	answer, err := q.rows(meter, progress)
	if err != nil {
		return nil, q.refusal(err)
	}
	out.EndingRules, out.States = answer.Ending, int32(answer.States)
	for i := range answer.Rows {
		out.Rows = append(out.Rows, rowToProto(&answer.Rows[i], answer.Quantiles, answer.Horizons))
	}
	for _, part := range []func() error{
		func() error { return q.addRates(meter, out) },
		func() error { return q.addMarginals(meter, answer, out) },
		func() error { return q.addChoice(meter, out, progress) },
		func() error { return q.addReal(meter, out, progress) },
	} {
		if err := part(); err != nil {
			return nil, q.refusal(err)
		}
	}
	return &RunLengthResult{Message: out, Answer: answer, Request: q.request}, nil
}

// rows answers shift by shift, so that progress can be told.
func (q *runLengthQuestion) rows(meter *effort.Meter, progress func(string, int, int)) (*runlength.Answer, error) {
	progress("run lengths", 0, max(1, len(q.request.Shifts)))
	answer, err := runlength.With(meter, q.request)
	if err == nil {
		progress("run lengths", len(answer.Rows), len(answer.Rows))
	}
	return answer, err
}

func (q *runLengthQuestion) addRates(meter *effort.Meter, out *pb.RunLengthResponse) error {
	if !q.rates && q.workload == nil {
		return nil
	}
	rates, err := runlength.LongRunWith(meter, q.request)
	if err != nil {
		return err
	}
	for i := range rates {
		out.Rows[i].Rates = ratesToProto(&rates[i])
		if w := q.workload; w != nil {
			load := rates[i].Workload(int(w.Tracks), w.PointsPerDay)
			out.Rows[i].Workload = &pb.Workload{PointsPerWeek: load.PointsPerWeek, SignalsPerWeek: load.SignalsPerWeek, PointsFlaggedPerWeek: load.PointsFlaggedPerWeek}
		}
	}
	return nil
}

func (q *runLengthQuestion) addMarginals(meter *effort.Meter, answer *runlength.Answer, out *pb.RunLengthResponse) error {
	if !q.marginal {
		return nil
	}
	r := q.request
	r.Shifts = nil // the customary ones, which the table is for
	for _, s := range q.request.Shifts {
		if s != 0 {
			r.Shifts = append(r.Shifts, s)
		}
	}
	table, err := runlength.MarginalsWith(meter, r)
	if err != nil {
		return err
	}
	for i := range table {
		line := &table[i]
		row := &pb.MarginalRow{
			Rule: line.ID, Trace: roleToProto(line.Trace), InControl: rowToProto(&line.InControl, answer.Quantiles, answer.Horizons),
			FalseAlarmsPer_1000: line.FalseAlarmsPer1000, FalseAlarmsAddedPer_1000: line.Added, PointsSaved: line.Saved, AloneArl: line.Alone.ARL,
		}
		for j := range line.Shifted {
			row.Shifted = append(row.Shifted, rowToProto(&line.Shifted[j], answer.Quantiles, answer.Horizons))
		}
		out.MarginalTable = append(out.MarginalTable, row)
	}
	return nil
}

func (q *runLengthQuestion) addChoice(meter *effort.Meter, out *pb.RunLengthResponse, progress func(string, int, int)) error {
	if q.choice == nil {
		return nil
	}
	c := *q.choice
	c.Request = q.request
	c.Progress = func(done, of int) { progress("subsets", done, of) }
	found, err := runlength.ChooseWith(meter, c)
	if err != nil {
		return err
	}
	for i := range found {
		one := &found[i]
		out.Candidates = append(out.Candidates, &pb.RuleCandidate{
			Rules: one.Rules, Label: one.Label, WithinBudget: one.Within, Rank: int32(one.Rank),
			InControl: rowToProto(&one.InControl, nil, nil), Shifted: rowToProto(&one.Shifted, nil, nil),
		})
	}
	return nil
}

func (q *runLengthQuestion) addReal(meter *effort.Meter, out *pb.RunLengthResponse, progress func(string, int, int)) error {
	if q.real == nil {
		return nil
	}
	r := *q.real
	r.Request = q.request
	r.Progress = func(done, of int) { progress("limits from data", done, of) }
	found, err := runlength.RealiseWith(meter, r)
	if err != nil {
		return err
	}
	out.RealLimits = realisedToProto(found)
	return nil
}
