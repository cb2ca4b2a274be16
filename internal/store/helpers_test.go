package store_test

import (
	"context"
	"crypto/sha256"
	"errors"
	"fmt"
	"strings"
	"sync/atomic"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgconn"

	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/pgtest"
	"limitary/internal/rules"
	"limitary/internal/store"
)

// fixture is a store on a database of its own, with four principals that have keys.
type fixture struct {
	*store.Store
	tb testing.TB
	db *pgtest.Database
	// admin makes keys; ann writes charts and versions, bob approves, cleo reviews.
	admin, ann, bob, cleo store.Actor
}

func newFixture(tb testing.TB) *fixture {
	tb.Helper()
	db := pgtest.New(tb)
	f := &fixture{Store: mustOpen(tb, db.ServiceURL()), tb: tb, db: db, admin: store.Actor{Principal: "operator"}}
	f.ann, f.bob, f.cleo = f.mustActor("ann", nil), f.mustActor("bob", nil), f.mustActor("cleo", nil)
	return f
}

func mustOpen(tb testing.TB, url string) *store.Store {
	tb.Helper()
	s, err := store.Open(tb.Context(), url, store.Options{MaxConns: 8})
	if err != nil {
		tb.Fatal(err)
	}
	tb.Cleanup(s.Close)
	return s
}

var requests atomic.Int64

// req gives a request that was never made before.
func req() store.Request { return reqOf(fmt.Sprintf("request-%d", requests.Add(1)), "body") }

func reqOf(id, body string) store.Request {
	sum := sha256.Sum256([]byte(body))
	return store.Request{ID: id, Method: "Test", Digest: sum[:]}
}

func keyHash(secret string) []byte {
	sum := sha256.Sum256([]byte(secret))
	return sum[:]
}

var keyIDs atomic.Int64

// key gives a key for a year; the tests run in real time and the database has the clock.
func key(principal string, labels map[string]string) definition.Key {
	return definition.Key{ID: fmt.Sprintf("key%013d", keyIDs.Add(1)), Principal: principal, Roles: definition.Permissions, Labels: labels,
		ExpiresAt: time.Now().Add(definition.KeyLifeDefault)}
}

func (f *fixture) mustActor(principal string, labels map[string]string) store.Actor {
	f.tb.Helper()
	k, fresh, err := f.CreateKey(f.tb.Context(), f.admin, req(), key(principal, labels), keyHash(principal))
	if err != nil || !fresh {
		f.tb.Fatalf("key for %s: fresh %v, %v", principal, fresh, err)
	}
	return store.Actor{Principal: principal, Key: k}
}

func individuals(name string) definition.Chart {
	return definition.Chart{Name: name, Title: "Nitrate, middle standard", Kind: chart.Individuals, SubgroupSize: 1, Unit: "mg/L",
		Labels: map[string]string{"site": "harwick", "analyte": "nitrate"}}
}

func (f *fixture) mustChart(c definition.Chart) definition.Chart {
	f.tb.Helper()
	made, err := f.CreateChart(f.tb.Context(), f.ann, req(), c)
	if err != nil {
		f.tb.Fatal(err)
	}
	return made
}

// day0 is long past, so that nothing in these tests lies in the future.
var day0 = time.Date(2025, 3, 3, 8, 0, 0, 0, time.UTC)

func day(n int) time.Time { return day0.AddDate(0, 0, n) }

// limits is a version of centre 10 and sigma 1 to propose; edit what differs.
type limits struct {
	chart  definition.Chart
	lot    string
	from   time.Time
	centre float64
	edit   func(*definition.Content)
}

func (l limits) content(author string) func(int, time.Time) (definition.Content, error) {
	return func(number int, at time.Time) (definition.Content, error) {
		centre, sigma := 10.0, 1.0
		if l.centre != 0 {
			centre = l.centre
		}
		c := definition.Content{Chart: l.chart.Name, Number: number, Lot: l.lot, Kind: l.chart.Kind, SubgroupSize: l.chart.SubgroupSize,
			Unit: l.chart.Unit, Decimals: 2, ProcessSigma: sigma, Author: author, ProposedAt: at, Reason: "first limits",
			EffectiveFrom: l.from, Judge: rules.JudgeNumber,
			Location: &definition.Trace{Trace: chart.Trace{Centre: &centre, Sigma: &sigma}, Rules: []rules.Spec{
				{ID: "lab/1", Kind: rules.Beyond, Consequence: rules.Stop, K: 1, M: 1, Z: 3},
				{ID: "lab/2", Kind: rules.SameSide, Consequence: rules.Act, N: 4},
			}}}
		if l.edit != nil {
			l.edit(&c)
		}
		return c, nil
	}
}

func (f *fixture) mustPropose(l limits) definition.Version {
	f.tb.Helper()
	v, err := f.ProposeVersion(f.tb.Context(), f.ann, req(), l.chart.Name, l.content("ann"))
	if err != nil {
		f.tb.Fatal(err)
	}
	return v
}

// mustApprove proposes and approves, touching whatever is stored and accepting what the version ends.
func (f *fixture) mustApprove(l limits) definition.Version {
	f.tb.Helper()
	v := f.mustPropose(l)
	_, patterns, _, err := f.GetVersion(f.tb.Context(), f.bob, l.chart.Name, v.Number)
	if err != nil {
		f.tb.Fatal(err)
	}
	var texts []string
	for _, p := range patterns {
		texts = append(texts, p.Text())
	}
	v, _, err = f.ApproveVersion(f.tb.Context(), f.bob, req(), l.chart.Name, v.Number, v.Digest, true, "limits for this test", texts)
	if err != nil {
		f.tb.Fatal(err)
	}
	return v
}

// result is the n-th daily control of a chart.
func result(c definition.Chart, n int, reading string) definition.Result {
	return definition.Result{Chart: c.Name, Source: "lims", SourceID: fmt.Sprintf("r%03d", n), MeasuredAt: day(n), MeasuredText: day(n).Format(time.RFC3339),
		Readings: []string{reading}}
}

// mustPost posts one reading a day from day first on; an empty reading skips the day.
func (f *fixture) mustPost(c definition.Chart, lot string, first int, readings ...string) store.PostAnswer {
	f.tb.Helper()
	var batch []definition.Result
	for i, reading := range readings {
		if reading != "" {
			r := result(c, first+i, reading)
			if r.Lot = lot; lot != "" {
				r.SourceID += "-" + lot
			}
			batch = append(batch, r)
		}
	}
	answer, err := f.PostResults(f.tb.Context(), f.ann, batch, true, nil)
	if err != nil {
		f.tb.Fatal(err)
	}
	for i, row := range answer.Rows {
		if row.Outcome != store.Accepted {
			f.tb.Fatalf("row %d: outcome %d, %v", i, row.Outcome, row.Problem)
		}
	}
	return answer
}

// verdicts gives standing and version of every result of a track in order, such as "CLEAR/1 STOP/1 NOT_JUDGED/0".
func (f *fixture) verdicts(c definition.Chart, lot string) string {
	f.tb.Helper()
	list, _, err := f.ListResults(f.tb.Context(), f.ann, store.ResultFilter{Chart: c.Name, Lot: lot}, store.Page{Size: store.PageSizeMax})
	if err != nil {
		f.tb.Fatal(err)
	}
	var words []string
	for _, r := range list {
		words = append(words, fmt.Sprintf("%v/%d", r.Verdict.Standing, r.Verdict.Version))
	}
	return strings.Join(words, " ")
}

func (f *fixture) mustTrack(c definition.Chart, lot string) store.Track {
	f.tb.Helper()
	tracks, _, err := f.ListTracks(f.tb.Context(), f.ann, c.Name, store.Page{})
	if err != nil {
		f.tb.Fatal(err)
	}
	for _, t := range tracks {
		if t.Lot == lot {
			return t
		}
	}
	f.tb.Fatalf("chart %s has no track %q", c.Name, lot)
	return store.Track{}
}

// mustSignals gives the signals of a chart by id.
func (f *fixture) mustSignals(c definition.Chart, statuses ...string) []store.Signal {
	f.tb.Helper()
	list, _, err := f.QuerySignals(f.tb.Context(), f.ann, store.SignalFilter{Chart: c.Name, Statuses: statuses}, store.Page{})
	if err != nil {
		f.tb.Fatal(err)
	}
	return list
}

// mustRecheck recomputes the whole database and wants no difference.
func (f *fixture) mustRecheck() {
	f.tb.Helper()
	report, err := f.Recheck(f.tb.Context(), func(int, int) {})
	if err != nil {
		f.tb.Fatal(err)
	}
	for _, d := range report.Differences {
		f.tb.Errorf("recheck: %s", d)
	}
}

// owner connects as the owner of the schema, past every guard of the service.
func (f *fixture) owner() *pgx.Conn {
	f.tb.Helper()
	return mustConnect(f.tb, f.db.OwnerURL())
}

func mustConnect(tb testing.TB, url string) *pgx.Conn {
	tb.Helper()
	conn, err := pgx.Connect(tb.Context(), url)
	if err != nil {
		tb.Fatal(err)
	}
	tb.Cleanup(func() { _ = conn.Close(context.Background()) })
	return conn
}

func mustExec(tb testing.TB, conn *pgx.Conn, sql string, args ...any) {
	tb.Helper()
	if _, err := conn.Exec(tb.Context(), sql, args...); err != nil {
		tb.Fatalf("%s: %v", sql, err)
	}
}

// wantReason wants a refusal of a reason, and gives it.
func wantReason(tb testing.TB, err error, want definition.Reason) *definition.Error {
	tb.Helper()
	var got *definition.Error
	if !errors.As(err, &got) || got.Reason != want {
		tb.Errorf("got %v, want a refusal %s", err, want)
		return &definition.Error{}
	}
	return got
}

func wantCode(tb testing.TB, err error, want string) {
	tb.Helper()
	var got *pgconn.PgError
	if !errors.As(err, &got) || got.Code != want {
		tb.Errorf("got %v, want SQLSTATE %s", err, want)
	}
}

func want(tb testing.TB, what string, got, want any) {
	tb.Helper()
	if fmt.Sprint(got) != fmt.Sprint(want) {
		tb.Errorf("%s: got %v, want %v", what, got, want)
	}
}
