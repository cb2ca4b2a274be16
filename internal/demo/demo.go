package demo

import (
	"context"
	"fmt"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/metadata"
	"google.golang.org/grpc/status"

	pb "limitary/api/limitary/v1"
)

// Tokens are the bearer tokens of the five principals of the demo. They must belong to five different principals, and
// to the same ones each time: a source of results belongs to whom posted first, and nobody approves his own.
type Tokens struct {
	Admin, Author, Approver, Poster, Reviewer string
}

// Summary says what the group has.
type Summary struct {
	// Already says that the demo was complete before, so that nothing was loaded.
	Already bool
	// Base is the moment the data end.
	Base                                       time.Time
	Charts, Archived, Tracks, Results          int
	VersionsApproved, VersionsProposed         int
	VersionsRejected                           int
	SignalsOpen, SignalsClosed, TracksHeld     int
	RequestsPending, RequestsConfirmed, Marked int
}

// Load posts the demo through the API, with data that end shortly before now. Progress, which may be nil, is told how many
// of the results have been dealt with. After an error, or after being cut off, it may be called again at any later time and
// goes on. Two loads of one service at the same time are not meant: every result is stored once, but one load may decide
// on signals that are the other's to leave open, or fail on a decision that the other has just taken.
func Load(ctx context.Context, conn grpc.ClientConnInterface, tokens Tokens, now time.Time, progress func(done, total int)) (Summary, error) {
	stories := Group()
	l := &loader{
		charts: pb.NewChartServiceClient(conn), limits: pb.NewLimitServiceClient(conn),
		evaluation: pb.NewEvaluationServiceClient(conn), signals: pb.NewSignalServiceClient(conn),
		tokens: tokens, progress: progress, results: map[*series][]*pb.Result{},
	}
	for _, s := range stories {
		l.total += s.results()
	}
	if err := l.anchor(ctx, stories[0], now); err != nil {
		return Summary{}, fmt.Errorf("demo: %w", err)
	}
	already, err := l.complete(ctx, stories[len(stories)-1])
	if err != nil {
		return Summary{}, fmt.Errorf("demo: %w", err)
	}
	if !already {
		for _, s := range stories {
			if err := l.tell(ctx, s); err != nil {
				return Summary{}, fmt.Errorf("demo, chart %s: %w", s.chart.Name, err)
			}
		}
	}
	sum, err := l.summarize(ctx)
	if err != nil {
		return Summary{}, fmt.Errorf("demo: %w", err)
	}
	sum.Already = already
	return sum, nil
}

// Story is everything that happens on one chart, in order.
type Story struct {
	chart *pb.Chart
	steps []step
}

// step is one thing that somebody does.
type step struct {
	do func(ctx context.Context, l *loader) error
	// posts is set where the step posts results, the last of which is last; count is how many.
	posts       *series
	last, count int
}

func (s Story) results() (n int) {
	for _, st := range s.steps {
		n += st.count
	}
	return n
}

// Results gives the control results of a story, in the order they are generated. The same base gives the same results.
func (s Story) Results(base time.Time) []*pb.Result {
	var out []*pb.Result
	seen := map[*series]bool{}
	for _, st := range s.steps {
		if st.posts != nil && !seen[st.posts] {
			seen[st.posts] = true
			out = append(out, st.posts.results(base)...)
		}
	}
	return out
}

// Chart gives the chart of a story, as it is created.
func (s Story) Chart() *pb.Chart { return s.chart }

// Group gives the stories of all charts of the group, laboratory by laboratory, in the order they are loaded.
func Group() []Story {
	var all []Story
	for _, laboratory := range [][]Story{harwick(), ostley(), brenmoor()} {
		all = append(all, laboratory...)
	}
	return all
}

// loader is one run of Load.
type loader struct {
	charts     pb.ChartServiceClient
	limits     pb.LimitServiceClient
	evaluation pb.EvaluationServiceClient
	signals    pb.SignalServiceClient
	tokens     Tokens
	base       time.Time
	results    map[*series][]*pb.Result

	progress    func(done, total int)
	done, total int
}

// as makes the calls under the context with a key.
func as(ctx context.Context, token string) context.Context {
	return metadata.AppendToOutgoingContext(ctx, "authorization", "Bearer "+token)
}

func (l *loader) report(n int) {
	l.done += n
	if l.progress != nil {
		l.progress(l.done, l.total)
	}
}

// of gives the results of a series, which are generated once.
func (l *loader) of(s *series) []*pb.Result {
	if l.results[s] == nil {
		l.results[s] = s.results(l.base)
	}
	return l.results[s]
}

// baseStep is what the base is a whole multiple of.
const baseStep = time.Minute

// anchor creates the first chart and posts its first result, to find out which moment the times hang on: the one given,
// or that of an earlier load, of which the service then shows the result that it has.
func (l *loader) anchor(ctx context.Context, first Story, now time.Time) error {
	if err := createChart(first.chart).do(ctx, l); err != nil {
		return err
	}
	l.base = now.UTC().Truncate(baseStep)
	s := first.steps[1].posts
	out, err := l.evaluation.PostResults(as(ctx, l.tokens.Poster), &pb.PostResultsRequest{Results: s.results(l.base)[:1]})
	if err != nil {
		return err
	}
	switch row := out.Results[0]; row.Outcome {
	case pb.PostOutcome_POST_OUTCOME_ACCEPTED, pb.PostOutcome_POST_OUTCOME_DUPLICATE:
		return nil
	case pb.PostOutcome_POST_OUTCOME_CONFLICT:
		at, err := time.Parse(time.RFC3339, row.Stored.MeasuredAt)
		if err != nil {
			return err
		}
		l.base = l.base.Add(at.Sub(s.at(l.base, 0))).UTC()
		return nil
	default:
		return refused(row)
	}
}

// complete reports whether the last post of the last story is stored. Stories are told in order, and so are their steps.
func (l *loader) complete(ctx context.Context, last Story) (bool, error) {
	return l.stored(ctx, last.steps[len(last.steps)-1])
}

// stored reports whether the last result of a step is stored.
func (l *loader) stored(ctx context.Context, st step) (bool, error) {
	_, err := l.evaluation.GetResult(as(ctx, l.tokens.Poster), &pb.GetResultRequest{
		Chart: st.posts.chart.Name, Source: st.posts.source, SourceId: st.posts.id(st.last),
	})
	if status.Code(err) == codes.NotFound {
		return false, nil
	}
	return err == nil, err
}

// tell takes the steps of a story, except those that an earlier load has behind it: where the last result of a step is
// stored, that step and all before it are done.
func (l *loader) tell(ctx context.Context, s Story) error {
	from := 0
	for i, st := range s.steps {
		if st.posts == nil {
			continue
		}
		there, err := l.stored(ctx, st)
		if err != nil {
			return err
		}
		if !there {
			break
		}
		from = i + 1
		l.report(st.count)
	}
	for _, st := range s.steps[from:] {
		if err := st.do(ctx, l); err != nil {
			return err
		}
		l.report(st.count)
	}
	return nil
}
