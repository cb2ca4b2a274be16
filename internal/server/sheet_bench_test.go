package server_test

import (
	"fmt"
	"io"
	"net/http"
	"slices"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	pb "limitary/api/limitary/v1"
	"limitary/internal/server"
)

const (
	stormReads       = 5000
	stormConnections = 50
	stormCharts      = 20
	// stormPosts is how many results are posted, one by one, in quiet and at least in the storm.
	stormPosts = 100
)

// storm is a workbook of many cells that recalculates over many connections while a system posts.
type storm struct {
	*bench
	posts                int
	answered, later, bad atomic.Int64
}

var stormCells = []string{"limit/%s/centre", "limit/%s/upper_action", "limit/%s/lower_action?decimal=comma", "limit/%s/sigma?version=1", "state/%s", "signals/%s", "verdict/%s?value=10.1"}

// BenchmarkRecalculationStorm reads 5,000 cells over 50 connections while results are posted one by one. All reads must be
// answered, or told when to come again. "post_storm/quiet" is the median time of a post in the storm over that of a post in
// quiet, before and after it in the same run; client, service and database share the machine.
func BenchmarkRecalculationStorm(b *testing.B) {
	for name, o := range map[string]server.Options{"within the rate": {}, "over the rate": {SheetBurst: 2000, SheetRate: 1}} {
		b.Run(name, func(b *testing.B) {
			s := &storm{bench: newBench(b, o)}
			for i := range stormCharts {
				c := fmt.Sprintf("storm-%d", i)
				s.chart(dialectChart(c))
				s.version(c, "", "2020-01-01T00:00:00Z", 10, 0.5, "western-electric-1956")
			}
			s.post(20, nil) // connections and caches are made before the clock runs
			b.ResetTimer()
			for range b.N {
				s.run(b)
			}
		})
	}
}

func (s *storm) run(b *testing.B) {
	quiet := s.post(stormPosts, nil)
	done := make(chan struct{})
	begin := time.Now()
	var took time.Duration
	go func() {
		defer close(done)
		s.recalculate(b)
		took = time.Since(begin)
	}()
	stormy := s.post(stormPosts, done)
	<-done
	quiet = append(quiet, s.post(stormPosts, nil)...)
	if n := s.answered.Load() + s.later.Load(); n != stormReads || s.bad.Load() > 0 {
		b.Errorf("%d reads were answered or told to come again, %d were neither", n, s.bad.Load())
	}
	b.ReportMetric(stormReads/took.Seconds(), "reads/s")
	b.ReportMetric(float64(s.answered.Load()), "answered")
	b.ReportMetric(float64(s.later.Load()), "told_later")
	b.ReportMetric(milliseconds(quiet, 0.5), "post_quiet_ms")
	b.ReportMetric(milliseconds(stormy, 0.5), "post_storm_ms")
	b.ReportMetric(milliseconds(stormy, 0.95), "post_storm_p95_ms")
	b.ReportMetric(milliseconds(stormy, 0.5)/milliseconds(quiet, 0.5), "post_storm/quiet")
	s.answered.Store(0)
	s.later.Store(0)
}

// milliseconds gives a quantile of times.
func milliseconds(times []time.Duration, q float64) float64 {
	slices.Sort(times)
	return float64(times[int(q*float64(len(times)-1))].Microseconds()) / 1000
}

// post posts results one by one, at least n and, where until is given, as long as it is open.
func (s *storm) post(n int, until <-chan struct{}) (times []time.Duration) {
	client := pb.NewEvaluationServiceClient(s.conn)
	for open := until != nil; n > 0 || open; n-- {
		s.posts++
		r := &pb.Result{Chart: fmt.Sprintf("storm-%d", s.posts%stormCharts), Source: "s", SourceId: fmt.Sprint(s.posts), Readings: []string{"10.1"},
			MeasuredAt: stamp("2026-03-02T09:30:00Z").AsTime().Add(time.Duration(s.posts) * time.Second).Format(time.RFC3339)}
		begin := time.Now()
		got, err := client.PostResults(s.as("poster"), &pb.PostResultsRequest{Results: []*pb.Result{r}})
		times = append(times, time.Since(begin))
		if s.must(err); got.Results[0].Outcome != pb.PostOutcome_POST_OUTCOME_ACCEPTED {
			s.tb.Fatal(got.Results[0])
		}
		select {
		case <-until:
			open = false
		default:
		}
	}
	return times
}

// recalculate reads all cells, each connection its share.
func (s *storm) recalculate(b *testing.B) {
	var next atomic.Int64
	var group sync.WaitGroup
	for range stormConnections {
		group.Go(func() {
			client := &http.Client{Transport: &http.Transport{MaxConnsPerHost: 1}}
			defer client.CloseIdleConnections()
			for i := next.Add(1); i <= stormReads; i = next.Add(1) {
				cell := fmt.Sprintf(stormCells[int(i)%len(stormCells)], fmt.Sprintf("storm-%d", int(i)%stormCharts))
				if err := s.read(client, cell); err != nil {
					b.Error(err)
				}
			}
		})
	}
	group.Wait()
}

func (s *storm) read(client *http.Client, cell string) error {
	req, err := http.NewRequest(http.MethodGet, "http://"+s.server.HTTPAddress()+"/sheet/"+cell, nil)
	if err != nil {
		return err
	}
	req.Header.Set("Authorization", "Bearer "+s.tokens["reader"])
	resp, err := client.Do(req)
	if err != nil {
		return err
	}
	defer resp.Body.Close()
	text, err := io.ReadAll(resp.Body)
	switch {
	case err != nil:
		return err
	case resp.StatusCode == http.StatusOK && len(text) > 0 && string(text[:min(len(text), 7)]) != "refused":
		s.answered.Add(1)
	case (resp.StatusCode == http.StatusTooManyRequests || resp.StatusCode == http.StatusServiceUnavailable) && resp.Header.Get("Retry-After") != "":
		s.later.Add(1)
	default:
		s.bad.Add(1)
		return fmt.Errorf("%s: %d %s", cell, resp.StatusCode, text)
	}
	return nil
}
