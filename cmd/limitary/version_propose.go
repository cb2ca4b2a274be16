package main

import (
	"context"
	"fmt"
	"strings"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/protobuf/types/known/timestamppb"

	pb "limitary/api/limitary/v1"
	"limitary/internal/limits"
)

const proposeAbout = `Computes a version and stores it for approval by another principal. The limits rest on stored results (--from and
--to), on a file sent along (--file), or on figures given (--centre and --sigma, which also replace what the data say).
With none of these they rest on all results stored that were measured before --effective-from. Flags that fit other kinds
of chart than CHART are refused by the service.`

// proposeFlags are what a proposal says.
type proposeFlags struct {
	client                 clientFlags
	source                 sourceFlags
	rules, dispersion      string
	from, to, file, about  string
	centre, sigma          numberFlag
	effective, reason, lot string
	estimator              string
	decimals               int
	excluded, cautions     listFlag
	onLook, onAct, onStop  string
	kinds                  kindFlags
	afterSignal            bool
	requestID              func() string
}

func (p *proposeFlags) add(f *flagSet) {
	p.client.add(f)
	p.requestID = requestIDFlag(f)
	f.StringVar(&p.rules, "rules", "", "`SET` of rules for the location trace, such as nelson-1984; required")
	f.StringVar(&p.dispersion, "dispersion-rules", "", "`SET` of rules for the dispersion trace (default: plotted, not judged)")
	f.StringVar(&p.from, "from", "", "`TIME` of the first stored result of the basis, RFC 3339 with offset")
	f.StringVar(&p.to, "to", "", "`TIME` before which the basis ends")
	f.Var(&p.excluded, "exclude-result", "`SOURCE/ID=REASON` of a stored result left out of the estimate; may be repeated")
	f.StringVar(&p.file, "file", "", "`FILE` of results to compute from")
	f.StringVar(&p.about, "data-description", "", "`TEXT` on where the file's data come from")
	p.source.register(f, true)
	p.kinds.register(f)
	f.BoolVar(&p.afterSignal, "after-signal", false, "the proposal is made because of a signal, so that the change test's p is not valid")
	f.Var(&p.centre, "centre", "centre `VALUE` instead of the data's")
	f.Var(&p.sigma, "sigma", "standard deviation `VALUE` of a single reading instead of the data's")
	f.StringVar(&p.estimator, "estimator", "", "`NAME` of the estimator of sigma (default: the usual one of the kind)")
	f.IntVar(&p.decimals, "decimals", -1, "`N` published decimals (default: the chart's, else from the data)")
	f.StringVar(&p.lot, "lot", "", "`LOT` the version is for, where lots are tracks (default: every track)")
	f.StringVar(&p.effective, "effective-from", "", "`TIME` from which it judges, RFC 3339 with offset; required")
	f.StringVar(&p.reason, "reason", "", "`TEXT`; required")
	f.Var(&p.cautions, "accept-caution", "`CODE` of a caution the author accepts; may be repeated")
	f.StringVar(&p.onLook, "on-look", "", "what the laboratory does on LOOK, in its own `WORDS`")
	f.StringVar(&p.onAct, "on-act", "", "`WORDS` for ACT")
	f.StringVar(&p.onStop, "on-stop", "", "`WORDS` for STOP")
}

func versionPropose(ctx context.Context, env *environment, args []string) int {
	f := newFlags(env, "version propose CHART --rules SET --effective-from TIME --reason TEXT [flags]", proposeAbout)
	var p proposeFlags
	p.add(f)
	rest, code, done := f.parse(args, 1, 1)
	if done {
		return code
	}
	in, err := p.request(rest[0])
	if err != nil {
		return f.wrong("%v", err)
	}
	if p.file != "" {
		src, err := p.source.read(ctx, env, p.file)
		if err != nil {
			if usage, ok := err.(usageError); ok {
				return f.wrong("%v", usage)
			}
			return fail(env, "%v", err)
		}
		if err := countsOnly(src); err != nil {
			return fail(env, "%v", err)
		}
		basis, err := sentBasis(src, p.about)
		if err != nil {
			return fail(env, "%v", err)
		}
		in.Basis = &pb.ProposeVersionRequest_Sent{Sent: basis}
	}
	return p.client.run(env, func(conn *grpc.ClientConn) (answer, error) {
		out, err := pb.NewLimitServiceClient(conn).ProposeVersion(ctx, in)
		return answer{out, func() int { return showVersion(env, out.Version) }}, err
	})
}

// request makes the call, but for a file's data.
func (p *proposeFlags) request(chart string) (*pb.ProposeVersionRequest, error) {
	in := &pb.ProposeVersionRequest{
		Chart: chart, RequestId: p.requestID(), Lot: p.lot, Reason: p.reason, AcceptedCautions: p.cautions,
		LocationRules: &pb.TraceRules{RuleSet: p.rules}, DispersionRules: &pb.TraceRules{RuleSet: p.dispersion},
		Instructions: &pb.Instructions{Look: p.onLook, Act: p.onAct, Stop: p.onStop}, AfterSignal: p.afterSignal,
	}
	if p.rules == "" || p.effective == "" || p.reason == "" {
		return nil, fmt.Errorf("--rules, --effective-from and --reason are required")
	}
	var err error
	if in.EffectiveFrom, err = timeFlag("effective-from", p.effective); err != nil {
		return nil, err
	}
	in.Centre, in.ProcessSigma = p.centre.value, p.sigma.value
	if in.Options, err = p.kinds.options(); err != nil {
		return nil, err
	}
	if p.estimator != "" {
		e, ok := pb.Estimator_value["ESTIMATOR_"+strings.ToUpper(strings.ReplaceAll(p.estimator, "-", "_"))]
		if !ok || e == 0 {
			return nil, fmt.Errorf("--estimator %q: want one of %s", p.estimator, estimatorNames())
		}
		in.Estimator = pb.Estimator(e)
	}
	if p.decimals >= 0 {
		d := int32(p.decimals)
		in.PublishedDecimals = &d
	}
	return in, p.storedBasis(in)
}

// firstMoment is before every result: the service keeps none from an earlier year.
const firstMoment = "1900-01-01T00:00:00Z"

func (p *proposeFlags) storedBasis(in *pb.ProposeVersionRequest) error {
	switch {
	case p.file != "" && (p.from != "" || p.to != "" || len(p.excluded) > 0):
		return fmt.Errorf("--file excludes --from, --to and --exclude-result")
	case p.file != "" || p.from == "" && p.to == "" && p.centre.value != nil && p.sigma.value != nil:
		return nil
	case p.from == "" && p.to == "":
		p.from, p.to = firstMoment, p.effective
	case p.from == "" || p.to == "":
		return fmt.Errorf("--from and --to belong together")
	}
	b := &pb.StoredBasis{}
	var err error
	if b.From, err = timeFlag("from", p.from); err != nil {
		return err
	}
	if b.To, err = timeFlag("to", p.to); err != nil {
		return err
	}
	for _, e := range p.excluded {
		key, reason, ok := strings.Cut(e, "=")
		source, id, both := strings.Cut(key, "/")
		if !ok || !both {
			return fmt.Errorf("--exclude-result %q: want SOURCE/ID=REASON", e)
		}
		b.Exclusions = append(b.Exclusions, &pb.StoredExclusion{Result: &pb.ResultKey{Source: source, SourceId: id}, Reason: reason})
	}
	in.Basis = &pb.ProposeVersionRequest_Stored{Stored: b}
	return nil
}

func timeFlag(flag, text string) (*timestamppb.Timestamp, error) {
	t, err := time.Parse(time.RFC3339Nano, text)
	if err != nil {
		return nil, fmt.Errorf("--%s %q: want an RFC 3339 time with an offset, such as 2026-03-02T09:30:00+01:00", flag, text)
	}
	return timestamppb.New(t), nil
}

func estimatorNames() string {
	var names []string
	for i := int32(1); i < int32(len(pb.Estimator_name)); i++ {
		names = append(names, strings.ToLower(enumWord(pb.Estimator_name[i], "ESTIMATOR_")))
	}
	return strings.Join(names, ", ")
}

// sentBasis turns a file into data to send along.
func sentBasis(src *source, about string) (*pb.SentBasis, error) {
	t := src.table
	if t.Len() > limits.GroupsMax {
		return nil, fmt.Errorf("%s has %d results, the limit is %d", src.name, t.Len(), limits.GroupsMax)
	}
	if t.Bounded > 0 {
		return nil, fmt.Errorf("%s has %d less-than or greater-than results, which give no value to estimate from", src.name, t.Bounded)
	}
	points := &pb.Points{}
	out := &pb.SentBasis{Data: &pb.SentBasis_Points{Points: points}, Description: strings.TrimSpace("File " + src.name + ". " + about)}
	for i := range t.Len() {
		points.Points = append(points.Points, sentPoint(src, i))
		if reason, ok := src.excluded[i]; ok {
			out.Exclusions = append(out.Exclusions, &pb.Exclusion{Point: int32(i), Reason: reason})
		} else if t.Excluded(i) {
			out.Exclusions = append(out.Exclusions, &pb.Exclusion{Point: int32(i), Reason: t.Row(i).Exclude})
		}
	}
	return out, nil
}

func sentPoint(src *source, i int) *pb.Point {
	p := &pb.Point{BreakBefore: src.table.Break(i), Material: src.table.Material(i)}
	if count := countAt(src, i); count != nil {
		p.Value = &pb.Point_Count{Count: count}
		return p
	}
	if figures := src.table.Figures(i); len(figures) > 0 {
		p.Value = &pb.Point_Readings{Readings: &pb.Readings{Values: figures}}
	}
	return p
}
