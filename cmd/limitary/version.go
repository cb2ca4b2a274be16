package main

import (
	"context"
	"fmt"
	"runtime/debug"
	"strconv"
	"text/tabwriter"

	"google.golang.org/grpc"

	pb "limitary/api/limitary/v1"
	"limitary/internal/rules"
)

const versionAbout = `Works on the versions of limits of a chart on a running service. Alone it prints this program's version.

  limitary version propose CHART [flags]            compute a version and store it for approval; role author
  limitary version list CHART [flags]
  limitary version show CHART NUMBER [flags]        what the approver reads, with its digest
  limitary version approve CHART NUMBER --digest D  by another principal than the author; role approver
  limitary version reject CHART NUMBER --reason R
  limitary version withdraw CHART NUMBER --reason R`

func runVersion(ctx context.Context, env *environment, args []string) int {
	if len(args) == 0 {
		return printVersion(env)
	}
	subcommands := map[string]func(context.Context, *environment, []string) int{
		"propose": versionPropose, "list": versionList, "show": versionShow,
		"approve": versionApprove, "reject": versionReject, "withdraw": versionWithdraw,
	}
	return dispatch(ctx, env, "version", versionAbout, subcommands, args)
}

func printVersion(env *environment) int {
	program := "(unknown)"
	if info, ok := debug.ReadBuildInfo(); ok {
		program = info.Main.Version
		for _, s := range info.Settings {
			if s.Key == "vcs.revision" && program == "(devel)" {
				program += " " + s.Value
			}
		}
	}
	fmt.Fprintf(env.Stdout, "limitary %s, judge number %d\n", program, rules.JudgeNumber)
	return exitOK
}

// onVersion runs what the subcommands about one version share: flags, arguments, connection and printing.
func onVersion(ctx context.Context, env *environment, f *flagSet, args []string, check func() error,
	call func(context.Context, pb.LimitServiceClient, string, int32) (answer, error)) int {
	var client clientFlags
	client.add(f)
	rest, code, done := f.parse(args, 2, 2)
	if done {
		return code
	}
	number, err := strconv.ParseInt(rest[1], 10, 32)
	if err != nil || number < 1 {
		return f.wrong("%q: want the number of a version", rest[1])
	}
	if err := check(); err != nil {
		return f.wrong("%v", err)
	}
	return client.run(env, func(conn *grpc.ClientConn) (answer, error) {
		return call(ctx, pb.NewLimitServiceClient(conn), rest[0], int32(number))
	})
}

// answer is what a call gave: the message, and how people read it.
type answer struct {
	message protoMessage
	print   func() int
}

// run connects, calls and prints.
func (c *clientFlags) run(env *environment, call func(*grpc.ClientConn) (answer, error)) int {
	conn, err := c.dial(env)
	if err != nil {
		return fail(env, "%v", err)
	}
	defer conn.Close()
	a, err := call(conn)
	if err != nil {
		return callFailed(env, err)
	}
	if c.json {
		return printJSON(env, a.message)
	}
	return a.print()
}

func versionShow(ctx context.Context, env *environment, args []string) int {
	f := newFlags(env, "version show CHART NUMBER [flags]", "Shows a version: its lines and rules, what they rest on, and what was found.")
	return onVersion(ctx, env, f, args, noCheck, func(ctx context.Context, c pb.LimitServiceClient, chart string, number int32) (answer, error) {
		out, err := c.GetVersion(ctx, &pb.GetVersionRequest{Chart: chart, Version: number})
		return answer{out, func() int { return showVersion(env, out.Version) }}, err
	})
}

func noCheck() error { return nil }

func versionApprove(ctx context.Context, env *environment, args []string) int {
	f := newFlags(env, "version approve CHART NUMBER --digest D [flags]", "Puts a proposed version in force from its effective moment. The approver is another principal than the author.")
	requestID := requestIDFlag(f)
	digest := f.String("digest", "", "`D`: the digest of the version that was read; required")
	rejudge := f.Bool("rejudge", false, "stored results may be judged anew; needs a reason")
	reason := f.String("reason", "", "`TEXT`")
	var patterns listFlag
	f.Var(&patterns, "accept-pattern", "`TEXT` of a pattern in progress that the version ends, as shown; may be repeated")
	check := func() error {
		if *digest == "" {
			return fmt.Errorf("--digest is required: it says which version was read")
		}
		return nil
	}
	return onVersion(ctx, env, f, args, check, func(ctx context.Context, c pb.LimitServiceClient, chart string, number int32) (answer, error) {
		out, err := c.ApproveVersion(ctx, &pb.ApproveVersionRequest{Chart: chart, Version: number, RequestId: requestID(), Digest: *digest,
			Rejudge: *rejudge, Reason: *reason, AcceptedPatterns: patterns})
		return answer{out, func() int { return decided(env, out.GetVersion(), out.GetResultsRejudged()) }}, err
	})
}

func versionReject(ctx context.Context, env *environment, args []string) int {
	f := newFlags(env, "version reject CHART NUMBER --reason TEXT [flags]", "Ends a proposal.")
	requestID := requestIDFlag(f)
	reason := f.String("reason", "", "`TEXT`; required")
	return onVersion(ctx, env, f, args, needs("reason", reason), func(ctx context.Context, c pb.LimitServiceClient, chart string, number int32) (answer, error) {
		out, err := c.RejectVersion(ctx, &pb.RejectVersionRequest{Chart: chart, Version: number, RequestId: requestID(), Reason: *reason})
		return answer{out, func() int { return decided(env, out.GetVersion(), 0) }}, err
	})
}

func versionWithdraw(ctx context.Context, env *environment, args []string) int {
	f := newFlags(env, "version withdraw CHART NUMBER --reason TEXT [flags]", "Takes an approved version out of force; nothing is in force until the next one.")
	requestID := requestIDFlag(f)
	reason := f.String("reason", "", "`TEXT`; required")
	rejudge := f.Bool("rejudge", false, "stored results may be judged anew")
	return onVersion(ctx, env, f, args, needs("reason", reason), func(ctx context.Context, c pb.LimitServiceClient, chart string, number int32) (answer, error) {
		out, err := c.WithdrawVersion(ctx, &pb.WithdrawVersionRequest{Chart: chart, Version: number, RequestId: requestID(), Rejudge: *rejudge, Reason: *reason})
		return answer{out, func() int { return withdrawn(env, out) }}, err
	})
}

func withdrawn(env *environment, out *pb.WithdrawVersionResponse) int {
	change := out.GetRequest()
	if change == nil {
		return decided(env, out.GetVersion(), out.GetResultsRejudged())
	}
	v := out.GetVersion()
	fmt.Fprintf(env.Stdout, "version %d of %s is still %s; its withdrawal, request %d, waits for another principal to confirm it: it would change %d verdicts and end %d signals\n",
		v.GetNumber(), v.GetChart(), enumWord(v.GetState().String(), "VERSION_STATE_"), change.GetId(), change.GetVerdictsChanged(), len(change.GetSignalsEnded()))
	return exitOK
}

func needs(flag string, value *string) func() error {
	return func() error {
		if *value == "" {
			return fmt.Errorf("--%s is required", flag)
		}
		return nil
	}
}

func decided(env *environment, v *pb.Version, rejudged int64) int {
	fmt.Fprintf(env.Stdout, "version %d of %s is %s; %d stored results were judged anew\n", v.Number, v.Chart, enumWord(v.State.String(), "VERSION_STATE_"), rejudged)
	return exitOK
}

func versionList(ctx context.Context, env *environment, args []string) int {
	f := newFlags(env, "version list CHART [flags]", "Lists the versions of a chart, newest first.")
	var client clientFlags
	client.add(f)
	rest, code, done := f.parse(args, 1, 1)
	if done {
		return code
	}
	return client.run(env, func(conn *grpc.ClientConn) (answer, error) {
		all := &pb.ListVersionsResponse{}
		in := &pb.ListVersionsRequest{Chart: rest[0], PageSize: listPage}
		for {
			out, err := pb.NewLimitServiceClient(conn).ListVersions(ctx, in)
			if err != nil {
				return answer{}, err
			}
			all.Versions = append(all.Versions, out.Versions...)
			if in.PageToken = out.NextPageToken; in.PageToken == "" {
				return answer{all, func() int { return listVersions(env, all.Versions) }}, nil
			}
		}
	})
}

func listVersions(env *environment, versions []*pb.Version) int {
	w := tabwriter.NewWriter(env.Stdout, 0, 8, 2, ' ', 0)
	fmt.Fprintln(w, "NUMBER\tSTATE\tIN FORCE\tLOT\tEFFECTIVE FROM\tAUTHOR\tDECIDED BY")
	for _, v := range versions {
		inForce := "-"
		if v.InForce {
			inForce = "yes"
		}
		fmt.Fprintf(w, "%d\t%s\t%s\t%s\t%s\t%s\t%s\n", v.Number, enumWord(v.State.String(), "VERSION_STATE_"), inForce, dash(v.Lot), protoTime(v.EffectiveFrom), v.Author, dash(v.DecidedBy))
	}
	return flush(env, w)
}
