package demo

import (
	"context"
	"fmt"
	"maps"
	"slices"
	"time"

	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/types/known/timestamppb"

	pb "limitary/api/limitary/v1"
)

// Steps are safe to take again when it is not known whether they were taken. All carry a request id that is always the
// same, which is enough where the request is; those that send along what they have read look first whether there is still
// something to do.

// batchMax is the number of results in one post.
const batchMax = 500

func createChart(c *pb.Chart) step {
	return step{do: func(ctx context.Context, l *loader) error {
		_, err := l.charts.CreateChart(as(ctx, l.tokens.Author), &pb.CreateChartRequest{Chart: c, RequestId: "demo-create-" + c.Name})
		return err
	}}
}

func archive(c *pb.Chart, reason string) step {
	return step{do: func(ctx context.Context, l *loader) error {
		ctx = as(ctx, l.tokens.Admin)
		got, err := l.charts.GetChart(ctx, &pb.GetChartRequest{Name: c.Name})
		if err != nil || got.Chart.Archived {
			return err
		}
		_, err = l.charts.ArchiveChart(ctx, &pb.ArchiveChartRequest{
			Name: c.Name, RequestId: "demo-archive-" + c.Name, ExpectedRevision: got.Chart.Revision, Reason: reason,
		})
		return err
	}}
}

// post posts the results from one index to before another, except some.
func post(s *series, from, to int, except ...int) step {
	var which []int
	for i := from; i < to; i++ {
		if !slices.Contains(except, i) {
			which = append(which, i)
		}
	}
	return step{posts: s, last: which[len(which)-1], count: len(which), do: func(ctx context.Context, l *loader) error {
		all := l.of(s)
		for part := range slices.Chunk(which, batchMax) {
			rows := make([]*pb.Result, len(part))
			for i, at := range part {
				rows[i] = all[at]
			}
			if err := l.post(ctx, rows...); err != nil {
				return err
			}
		}
		return nil
	}}
}

// postAgain posts one result a second time, as a system does that did not get the answer to the first.
func postAgain(s *series, i int) step {
	return step{do: func(ctx context.Context, l *loader) error { return l.post(ctx, l.of(s)[i]) }}
}

// repeat posts a repeat of result i, measured some minutes after it.
func repeat(s *series, i int, reading string) step {
	return step{do: func(ctx context.Context, l *loader) error {
		r := proto.Clone(l.of(s)[i]).(*pb.Result)
		r.SourceId, r.RepeatOf, r.Role = r.SourceId+"-R1", r.SourceId, pb.ResultRole_RESULT_ROLE_REPEAT
		r.Replicate = 1
		r.Readings = []string{reading}
		r.MeasuredAt = s.at(l.base, i).Add(2 * time.Minute).Format(time.RFC3339)
		return l.post(ctx, r)
	}}
}

func (l *loader) post(ctx context.Context, rows ...*pb.Result) error {
	out, err := l.evaluation.PostResults(as(ctx, l.tokens.Poster), &pb.PostResultsRequest{Results: rows})
	if err != nil {
		return err
	}
	for _, row := range out.Results {
		if row.Outcome != pb.PostOutcome_POST_OUTCOME_ACCEPTED && row.Outcome != pb.PostOutcome_POST_OUTCOME_DUPLICATE {
			return refused(row)
		}
	}
	return nil
}

func refused(row *pb.PostedResult) error {
	return fmt.Errorf("result %s of chart %s: %s %s: %s", row.SourceId, row.Chart, row.Outcome, row.Reason, row.Message)
}

// mark notes an event just before result i.
func mark(s *series, i int, text string) step {
	return step{do: func(ctx context.Context, l *loader) error {
		_, err := l.charts.AddMark(as(ctx, l.tokens.Author), &pb.AddMarkRequest{
			Chart: s.chart.Name, RequestId: fmt.Sprintf("demo-mark-%s-%d", s.prefix, i),
			Mark: &pb.Mark{Chart: s.chart.Name, Lot: s.track(), At: timestamppb.New(s.before(l.base, i)), Text: text},
		})
		return err
	}}
}

// proposal is what an author asks for.
type proposal struct {
	// number is the version it will be.
	number int32
	// The basis are the results from one index to before another, except those left out for a reason; where to is 0 it is
	// centre and sigma as given.
	from, to      int
	exclude       map[int]string
	centre, sigma *float64
	decimals      *int32

	location, dispersion *pb.TraceRules
	locationLines        *pb.FixedLines
	options              *pb.KindOptions
	instructions         *pb.Instructions
	reason               string
	cautions             []string
	// afterSignal says that the data were looked at because of a signal.
	afterSignal bool
	// effective is the first result that the version judges.
	effective int
}

// propose has the author propose a version.
func propose(s *series, p proposal) step {
	return step{do: func(ctx context.Context, l *loader) error {
		in := &pb.ProposeVersionRequest{
			Chart: s.chart.Name, RequestId: fmt.Sprintf("demo-propose-%s-%d", s.chart.Name, p.number), Lot: s.track(),
			Centre: p.centre, ProcessSigma: p.sigma, PublishedDecimals: p.decimals,
			LocationLines: p.locationLines, LocationRules: p.location, DispersionRules: p.dispersion,
			EffectiveFrom: timestamppb.New(s.before(l.base, p.effective)), Reason: p.reason,
			Instructions: p.instructions, AcceptedCautions: p.cautions, Options: p.options, AfterSignal: p.afterSignal,
		}
		if p.to > 0 {
			in.Basis = &pb.ProposeVersionRequest_Stored{Stored: p.stored(s, l.base)}
		}
		_, err := l.limits.ProposeVersion(as(ctx, l.tokens.Author), in)
		return err
	}}
}

func (p *proposal) stored(s *series, base time.Time) *pb.StoredBasis {
	b := &pb.StoredBasis{
		From: timestamppb.New(s.before(base, p.from)),
		To:   timestamppb.New(s.at(base, p.to-1).Add(time.Minute)),
	}
	for _, i := range slices.Sorted(maps.Keys(p.exclude)) {
		b.Exclusions = append(b.Exclusions, &pb.StoredExclusion{
			Result: &pb.ResultKey{Source: s.source, SourceId: s.id(i)}, Reason: p.exclude[i],
		})
	}
	return b
}

// approve has the approver read a version and approve it with the digest that was read, accepting the patterns it ends.
// Rejudge is the reason for judging stored results anew, empty where none are touched.
func approve(c *pb.Chart, number int32, rejudge string) step {
	return step{do: func(ctx context.Context, l *loader) error {
		ctx = as(ctx, l.tokens.Approver)
		got, err := l.limits.GetVersion(ctx, &pb.GetVersionRequest{Chart: c.Name, Version: number})
		if err != nil || got.Version.State != pb.VersionState_VERSION_STATE_PROPOSED {
			return err
		}
		in := &pb.ApproveVersionRequest{
			Chart: c.Name, Version: number, RequestId: fmt.Sprintf("demo-approve-%s-%d", c.Name, number),
			Digest: got.Version.Digest, Rejudge: rejudge != "", Reason: rejudge,
		}
		for _, p := range got.Version.PatternsEnded {
			in.AcceptedPatterns = append(in.AcceptedPatterns, p.Text)
		}
		_, err = l.limits.ApproveVersion(ctx, in)
		return err
	}}
}

// reject has the approver end a proposal.
func reject(c *pb.Chart, number int32, reason string) step {
	return step{do: func(ctx context.Context, l *loader) error {
		_, err := l.limits.RejectVersion(as(ctx, l.tokens.Approver), &pb.RejectVersionRequest{
			Chart: c.Name, Version: number, RequestId: fmt.Sprintf("demo-reject-%s-%d", c.Name, number), Reason: reason,
		})
		return err
	}}
}
