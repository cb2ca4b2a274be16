package store_test

import (
	"context"
	"crypto/sha256"
	"fmt"
	"math/rand/v2"
	"os"
	"runtime"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"github.com/jackc/pgx/v5/pgxpool"

	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/postgres"
	"limitary/internal/rules"
	"limitary/internal/store"
)

// bench is a durable private database with the demo rules in force on some charts.
type bench struct {
	store  *store.Store
	pool   *pgxpool.Pool // as the owner, for the baselines
	poster store.Actor
}

func newBench(b *testing.B, charts int) *bench {
	b.Helper()
	ctx := b.Context()
	dir, err := os.MkdirTemp("", "limitary-bench")
	if err != nil {
		b.Fatal(err)
	}
	os.Chmod(dir, 0o755)
	b.Cleanup(func() { os.RemoveAll(dir) })
	cluster, err := postgres.Start(ctx, postgres.Options{Dir: dir + "/state", Durable: true})
	if err != nil {
		b.Fatal(err)
	}
	b.Cleanup(func() { cluster.Stop() })
	owner := cluster.URL(postgres.Database, postgres.Owner)
	if _, err := store.Migrate(ctx, owner); err != nil {
		b.Fatal(err)
	}
	be := &bench{}
	if be.store, err = store.Open(ctx, owner, store.Options{MaxConns: 20}); err != nil {
		b.Fatal(err)
	}
	b.Cleanup(be.store.Close)
	if be.pool, err = pgxpool.New(ctx, owner+"&pool_max_conns=20"); err != nil {
		b.Fatal(err)
	}
	b.Cleanup(be.pool.Close)
	be.found(b, charts)
	return be
}

func (be *bench) actor(b *testing.B, name string) store.Actor {
	hash := sha256.Sum256([]byte(name))
	k := definition.Key{ID: fmt.Sprintf("%x", hash)[:16], Principal: name, Roles: definition.Permissions, ExpiresAt: time.Now().Add(time.Hour)}
	made, _, err := be.store.CreateKey(b.Context(), store.Actor{Principal: name, Key: k}, request("key", name), k, hash[:])
	if err != nil {
		b.Fatal(err)
	}
	return store.Actor{Principal: name, Key: made}
}

func (be *bench) found(b *testing.B, charts int) {
	author, approver := be.actor(b, "author"), be.actor(b, "approver")
	be.poster = be.actor(b, "poster")
	set, _ := rules.SetByID("nelson-1984")
	for i := range charts {
		name := fmt.Sprint("bench-", i)
		if _, err := be.store.CreateChart(b.Context(), author, request("create", name), definition.Chart{Name: name, Kind: chart.Individuals, SubgroupSize: 1, Unit: "mg/L"}); err != nil {
			b.Fatal(err)
		}
		centre, sigma := 10.0, 1.0
		v, err := be.store.ProposeVersion(b.Context(), author, request("propose", name), name, func(number int, at time.Time) (definition.Content, error) {
			return definition.Content{Chart: name, Number: number, Kind: chart.Individuals, SubgroupSize: 1, Unit: "mg/L", Decimals: 4, ProcessSigma: sigma,
				Location: &definition.Trace{Trace: chart.Trace{Centre: &centre, Sigma: &sigma}, RuleSet: set.ID, Rules: set.Rules}, Author: author.Principal, ProposedAt: at,
				Reason: "bench", EffectiveFrom: epoch.Add(-time.Hour), Judge: rules.JudgeNumber, Basis: "given"}, nil
		})
		if err != nil {
			b.Fatal(err)
		}
		if _, _, err := be.store.ApproveVersion(b.Context(), approver, request("approve", name), name, 1, v.Digest, false, "", nil); err != nil {
			b.Fatal(err)
		}
	}
}

// benchRow is the n-th result of a chart in control: standard normal noise around the centre, from a seeded generator.
func benchRow(chartName string, n int) definition.Result {
	value := 10 + rand.New(rand.NewPCG(uint64(n), 11)).NormFloat64()
	at := epoch.Add(time.Duration(n) * 20 * time.Second)
	return definition.Result{Chart: chartName, Source: "lims", SourceID: fmt.Sprintf("%09d", n), MeasuredAt: at, MeasuredText: at.Format(time.RFC3339), Role: definition.Routine,
		Readings: []string{fmt.Sprintf("%.2f", value)}, RunID: fmt.Sprintf("R%07d", n/10), Unit: "mg/L", Analyst: "AB", Instrument: "IC-2"}
}

func (be *bench) post(ctx context.Context, rows []definition.Result) error {
	answer, err := be.store.PostResults(ctx, be.poster, rows, false, nil)
	if err != nil {
		return err
	}
	for _, r := range answer.Rows {
		if r.Outcome != store.Accepted {
			return fmt.Errorf("outcome %d: %v", r.Outcome, r.Problem)
		}
	}
	return nil
}

// raw is the baseline: the same results in one multi-row insert into a table with their natural key and nothing else.
func (be *bench) raw(ctx context.Context, rows []definition.Result) error {
	n := len(rows)
	charts, sources, ids, runs, readings := make([]string, n), make([]string, n), make([]string, n), make([]string, n), make([]string, n)
	units, analysts, instruments, measured := make([]string, n), make([]string, n), make([]string, n), make([]time.Time, n)
	for i, r := range rows {
		charts[i], sources[i], ids[i], runs[i], readings[i] = r.Chart, r.Source, r.SourceID, r.RunID, r.Readings[0]
		units[i], analysts[i], instruments[i], measured[i] = r.Unit, r.Analyst, r.Instrument, r.MeasuredAt
	}
	_, err := be.pool.Exec(ctx, `INSERT INTO raw SELECT * FROM unnest($1::text[], $2::text[], $3::text[], $4::timestamptz[], $5::text[], $6::text[], $7::text[], $8::text[], $9::text[])`,
		charts, sources, ids, measured, runs, readings, units, analysts, instruments)
	return err
}

func (be *bench) rawTable(b *testing.B) {
	_, err := be.pool.Exec(b.Context(), `CREATE TABLE raw (chart text, source text, source_id text, measured_at timestamptz, run_id text, reading text, unit text,
		analyst text, instrument text, PRIMARY KEY (chart, source, source_id))`)
	if err != nil {
		b.Fatal(err)
	}
}

// BenchmarkPostThousand posts 1,000 results of one track at a time, beside a raw multi-row insert of the same results,
// both durable, by turns. The ratio is our rate over the raw one.
func BenchmarkPostThousand(b *testing.B) {
	be := newBench(b, 1)
	be.rawTable(b)
	var ours, raw time.Duration
	n := 0
	for b.Loop() {
		rows := make([]definition.Result, 1000)
		for i := range rows {
			rows[i] = benchRow("bench-0", n)
			n++
		}
		ours += timed(b, func() error { return be.post(b.Context(), rows) })
		raw += timed(b, func() error { return be.raw(b.Context(), rows) })
	}
	b.ReportMetric(float64(n)/ours.Seconds(), "results/s")
	b.ReportMetric(float64(n)/raw.Seconds(), "raw/s")
	b.ReportMetric(100*raw.Seconds()/ours.Seconds(), "%of-raw")
}

func timed(b *testing.B, do func() error) time.Duration {
	start := time.Now()
	if err := do(); err != nil {
		b.Fatal(err)
	}
	return time.Since(start)
}

// BenchmarkPostSingle posts results one by one, 16 callers over 64 tracks, beside 16 callers committing single rows.
func BenchmarkPostSingle(b *testing.B) {
	const callers, charts, each = 16, 64, 100
	be := newBench(b, charts)
	be.rawTable(b)
	var next [charts]atomic.Int64
	run := func(do func(ctx context.Context, row definition.Result) error) time.Duration {
		start := time.Now()
		var wg sync.WaitGroup
		for caller := range callers {
			wg.Go(func() {
				for i := range each {
					c := (caller + i*callers) % charts
					if err := do(b.Context(), benchRow(fmt.Sprint("bench-", c), int(next[c].Add(1)))); err != nil {
						b.Error(err)
						return
					}
				}
			})
		}
		wg.Wait()
		return time.Since(start)
	}
	var ours, raw time.Duration
	rounds := 0
	for b.Loop() {
		rounds++
		ours += run(func(ctx context.Context, row definition.Result) error { return be.post(ctx, []definition.Result{row}) })
		raw += run(func(ctx context.Context, row definition.Result) error { return be.raw(ctx, []definition.Result{row}) })
	}
	total := float64(rounds * callers * each)
	b.ReportMetric(total/ours.Seconds(), "posts/s")
	b.ReportMetric(total/raw.Seconds(), "raw/s")
	b.ReportMetric(100*raw.Seconds()/ours.Seconds(), "%of-raw")
}

// BenchmarkLateResult posts a late result near the head of a track of a million results, beside an append to its end.
// The second metric is the query for open signals, newest first, among the same million.
func BenchmarkLateResult(b *testing.B) {
	total := 1_000_000
	if testing.Short() {
		total = 20_000
	}
	be := newBench(b, 1)
	for n := 0; n < total; n += 5000 {
		rows := make([]definition.Result, 5000)
		for i := range rows {
			rows[i] = benchRow("bench-0", n+i)
		}
		if err := be.post(b.Context(), rows); err != nil {
			b.Fatal(err)
		}
	}
	if _, err := be.pool.Exec(b.Context(), `ANALYZE`); err != nil {
		b.Fatal(err)
	}
	runtime.GC()
	var late, appended, query time.Duration
	rounds := 0
	for b.Loop() {
		rounds++
		row := benchRow("bench-0", total+rounds)
		appended += timed(b, func() error { return be.post(b.Context(), []definition.Result{row}) })
		row = benchRow("bench-0", 10*rounds)
		row.SourceID, row.MeasuredAt = fmt.Sprint("late-", rounds), row.MeasuredAt.Add(time.Second)
		late += timed(b, func() error { return be.post(b.Context(), []definition.Result{row}) })
		query += timed(b, func() error {
			_, _, err := be.store.QuerySignals(b.Context(), be.poster, store.SignalFilter{Statuses: []string{"OPEN"}}, store.Page{Size: 100})
			return err
		})
	}
	b.ReportMetric(appended.Seconds()*1e3/float64(rounds), "ms/append")
	b.ReportMetric(late.Seconds()*1e3/float64(rounds), "ms/late")
	b.ReportMetric(late.Seconds()/appended.Seconds(), "late/append")
	b.ReportMetric(query.Seconds()*1e3/float64(rounds), "ms/open-signals")
}
