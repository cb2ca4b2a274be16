package server_test

import (
	"context"
	"encoding/json"
	"net/http"
	"testing"

	"github.com/jackc/pgx/v5"
	"google.golang.org/grpc/codes"

	"limitary/internal/server"
)

// TestADatabaseStoppedInMidCall cuts the database off while a post waits in it, and while it is gone asks for more: every
// caller is told to come again, health says so, and once it is back the same post is stored exactly once.
func TestADatabaseStoppedInMidCall(t *testing.T) {
	for i, name := range []string{"grpc", "rest"} {
		t.Run(name, func(t *testing.T) {
			f := newFixture(t, server.Options{})
			over := f.transports(t)[i]
			ctx := context.Background()
			call := func(as, call, request string) outcome {
				t.Helper()
				got, err := over.call(ctx, as, call, []byte(request))
				if err != nil {
					t.Fatal(err)
				}
				return got
			}
			if got := call("author", "ChartService/CreateChart", `{"requestId": "c", "chart": {"name": "nitrate", "kind": "CHART_KIND_INDIVIDUALS", "subgroupSize": 1, "unit": "mg/L"}}`); got.code != codes.OK {
				t.Fatal(got)
			}
			const post = `{"results": [{"chart": "nitrate", "source": "lims", "sourceId": "r1", "measuredAt": "2020-01-01T00:00:00Z", "readings": ["10"]}]}`
			waiting, wake := f.stallPosts(t)
			cut := make(chan outcome, 1)
			go func() {
				got, err := over.call(ctx, "poster", "EvaluationService/PostResults", []byte(post))
				if err != nil {
					t.Error(err)
				}
				cut <- got
			}()
			waiting()
			f.db.Refuse()
			check := func(what string, got outcome) {
				t.Helper()
				if got.code != codes.Unavailable || got.reason != "ERROR_REASON_UNAVAILABLE" || got.http != 0 && got.http != http.StatusServiceUnavailable {
					t.Errorf("%s: got %s %s HTTP %d (%s), want UNAVAILABLE", what, got.code, got.reason, got.http, got.message)
				}
			}
			check("the post in mid-call", <-cut)
			check("a call while it is gone", call("reader", "ChartService/ListCharts", `{}`))
			check("a call that needs the key alone", call("reader", "RuleService/ListRules", `{}`))
			checkReady(t, f, http.StatusServiceUnavailable)
			f.db.Allow()
			wake()
			checkReady(t, f, http.StatusOK)
			if got := call("poster", "EvaluationService/PostResults", post); firstOutcome(t, got) != "POST_OUTCOME_ACCEPTED" {
				t.Errorf("posted again: got %v", got)
			}
			if got := call("poster", "EvaluationService/PostResults", post); firstOutcome(t, got) != "POST_OUTCOME_DUPLICATE" {
				t.Errorf("posted a third time: got %v", got)
			}
		})
	}
}

func firstOutcome(t *testing.T, o outcome) string {
	t.Helper()
	v, _ := at(o.body, "results.0.outcome")
	s, _ := v.(string)
	return s
}

func checkReady(t *testing.T, f *fixture, want int) {
	t.Helper()
	for path, want := range map[string]int{"/readyz": want, "/healthz": http.StatusOK} {
		resp, err := http.Get("http://" + f.server.HTTPAddress() + path)
		if err != nil {
			t.Fatal(err)
		}
		_ = resp.Body.Close()
		if resp.StatusCode != want {
			t.Errorf("%s: got %d, want %d", path, resp.StatusCode, want)
		}
	}
}

// stallPosts makes every post fall asleep in the middle of its transaction. Waiting returns once one has, wake ends it
// for the posts to come.
func (f *fixture) stallPosts(t *testing.T) (waiting, wake func()) {
	t.Helper()
	ctx := context.Background()
	connect := func() *pgx.Conn {
		conn, err := pgx.Connect(ctx, f.db.OwnerURL())
		if err != nil {
			t.Fatal(err)
		}
		t.Cleanup(func() { _ = conn.Close(ctx) })
		return conn
	}
	watcher := connect()
	_, err := watcher.Exec(ctx, `CREATE FUNCTION fall_asleep() RETURNS trigger LANGUAGE plpgsql AS $$ BEGIN PERFORM pg_sleep(600); RETURN NULL; END $$;
		CREATE TRIGGER fall_asleep BEFORE INSERT ON results FOR EACH STATEMENT EXECUTE FUNCTION fall_asleep()`)
	if err != nil {
		t.Fatal(err)
	}
	waiting = func() {
		for n := 0; n == 0; {
			err := watcher.QueryRow(ctx, `SELECT count(*) FROM pg_stat_activity WHERE datname = current_database() AND wait_event = 'PgSleep'`).Scan(&n)
			if err != nil {
				t.Fatal(err)
			}
		}
	}
	wake = func() {
		if _, err := connect().Exec(ctx, `DROP TRIGGER fall_asleep ON results`); err != nil {
			t.Fatal(err)
		}
	}
	return waiting, wake
}

func TestAnswersAreTheSameOverBothTransports(t *testing.T) {
	f := newFixture(t, server.Options{})
	var bodies []string
	for _, over := range f.transports(t) {
		got, err := over.call(context.Background(), "reader", "RuleService/ListRules", []byte(`{}`))
		if err != nil || got.code != codes.OK {
			t.Fatal(got, err)
		}
		b, err := json.Marshal(got.body)
		if err != nil {
			t.Fatal(err)
		}
		bodies = append(bodies, string(b))
	}
	if bodies[0] != bodies[1] {
		t.Errorf("grpc %s\nrest %s", bodies[0], bodies[1])
	}
}
