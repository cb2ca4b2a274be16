package server_test

import (
	"net/http"
	"net/url"
	"strings"
	"sync"
	"testing"
	"time"

	"limitary/internal/server"
)

// TestCaching asks again with what was answered: 304 without a body, and another answer once the number has changed.
func TestCaching(t *testing.T) {
	b := newBench(t, server.Options{})
	for target, wantCache := range map[string]string{
		"limit/nitrate/centre":           "private, no-cache",
		"limit/nitrate/centre?version=1": "private, immutable, max-age=31536000",
		"limit/nitrate/centre?version=2": "private, no-cache", // there is none: the refusal may change
		"limits.csv":                     "private, no-cache",
		"limits.xlsx":                    "private, no-cache",
		"results/nitrate.tsv":            "private, no-cache",
		"batch?keys=nitrate/centre":      "private, no-cache",
	} {
		first := b.ask("reader", http.MethodGet, target, "")
		tag := first.header.Get("ETag")
		if first.status != 200 || tag == "" || first.header.Get("Cache-Control") != wantCache || first.header.Get("Referrer-Policy") != "no-referrer" {
			t.Errorf("%s: %d, ETag %s, Cache-Control %s", target, first.status, tag, first.header.Get("Cache-Control"))
		}
		for _, given := range []string{tag, "*", `"other", ` + tag, strings.TrimPrefix(tag, "W/")} {
			if again := b.ask("reader", http.MethodGet, target, "", "If-None-Match", given); again.status != 304 || again.body != "" || again.header.Get("ETag") != tag {
				t.Errorf("%s with %s: %d %q", target, given, again.status, again.body)
			}
		}
		if again := b.ask("reader", http.MethodGet, target, "", "If-None-Match", `"other"`); again.status != 200 || again.header.Get("ETag") != tag {
			t.Errorf("%s with another tag: %d", target, again.status)
		}
		head := b.ask("reader", http.MethodHead, target, "")
		if head.status != 200 || head.body != "" || head.header.Get("ETag") != tag || head.header.Get("Content-Type") != first.header.Get("Content-Type") {
			t.Errorf("HEAD %s: %d %q %v", target, head.status, head.body, head.header)
		}
	}
	old := b.ask("reader", http.MethodGet, "limit/nitrate/centre", "").header.Get("ETag")
	b.version("nitrate", "", "2021-01-01T00:00:00Z", 11, 0.5, "western-electric-1956")
	if now := b.ask("reader", http.MethodGet, "limit/nitrate/centre", "", "If-None-Match", old); now.status != 200 || now.body != "11" {
		t.Errorf("after a new version: %d %s", now.status, now.body)
	}
	if pinned := b.get("limit/nitrate/centre?version=1"); pinned != "10" {
		t.Errorf("version 1 now has the centre %s", pinned)
	}
}

// TestOtherOrigins goes through what a browser asks before and after.
func TestOtherOrigins(t *testing.T) {
	b := newBench(t, server.Options{})
	preflight := func(target, method string) reply {
		return b.ask("", http.MethodOptions, target, "", "Origin", "https://sheets.example", "Access-Control-Request-Method", method, "Access-Control-Request-Headers", "authorization")
	}
	for target, method := range map[string]string{"limit/nitrate/centre": "GET", "limits.csv": "GET", "results/nitrate.csv": "GET", "judge/nitrate": "POST", "batch": "POST"} {
		r := preflight(target, method)
		if r.status != 204 || r.header.Get("Access-Control-Allow-Origin") != "*" || !strings.Contains(r.header.Get("Access-Control-Allow-Headers"), "Authorization") {
			t.Errorf("preflight of %s %s: %d %v", method, target, r.status, r.header)
		}
	}
	if r := preflight("results/nitrate", "POST"); r.header.Get("Access-Control-Allow-Origin") != "" || r.header.Get("Access-Control-Allow-Headers") != "" {
		t.Errorf("posting is allowed to other origins: %v", r.header)
	}
	read := b.ask("reader", http.MethodGet, "limit/nitrate/centre", "", "Origin", "https://sheets.example")
	if read.header.Get("Access-Control-Allow-Origin") != "*" || read.header.Get("Access-Control-Allow-Credentials") != "" || !strings.Contains(read.header.Get("Access-Control-Expose-Headers"), "ETag") {
		t.Errorf("a read: %v", read.header)
	}
	if refused := b.ask("", http.MethodGet, "limit/nitrate/centre", "", "Origin", "https://sheets.example"); refused.status != 401 || refused.header.Get("Access-Control-Allow-Origin") != "*" {
		t.Errorf("a read without key: %d %v", refused.status, refused.header)
	}
	if plain := b.ask("", http.MethodOptions, "judge/nitrate", ""); plain.status != 204 || plain.header.Get("Allow") != "POST, OPTIONS" {
		t.Errorf("OPTIONS: %d %v", plain.status, plain.header)
	}
}

// TestAKeyInTheAddress reads with a key that can only read, refuses all others, and looks for every secret in log and answers.
func TestAKeyInTheAddress(t *testing.T) {
	b := newBench(t, server.Options{})
	for _, c := range []struct {
		key, method, target string
		headers             []string
		want                int
		text                string
	}{
		{"reader", "GET", "limit/nitrate/centre", nil, 200, "10"},
		{"reader", "GET", "limit/nitrate/centre?decimal=comma&version=1", nil, 200, "10"},
		{"reader", "GET", "limits.csv", nil, 200, "nitrate"},
		{"reader", "GET", "nothing", nil, 404, "no /sheet/nothing"},
		{"reader", "POST", "results/nitrate?source=s", nil, 403, "Bearer"},
		{"reader", "POST", "judge/nitrate", nil, 403, "Bearer"},
		{"reader", "GET", "limit/nitrate/centre", []string{"Authorization", "Bearer " + b.tokens["reader"]}, 400, "give it once"},
		{"poster", "GET", "limit/nitrate/centre", nil, 403, "never stand in an address"},
		{"ostley", "GET", "limit/nitrate/centre", nil, 403, "have it revoked"},
		{"both", "GET", "limits.csv", nil, 403, "never stand in an address"},
		{"revoked", "GET", "limit/nitrate/centre", nil, 401, ""},
		{"unknown", "GET", "limit/nitrate/centre", nil, 401, ""},
		{"malformed", "GET", "limit/nitrate/centre", nil, 401, "form"},
	} {
		at := "?"
		if strings.Contains(c.target, "?") {
			at = "&"
		}
		r := b.ask("", c.method, c.target+at+"key="+url.QueryEscape(b.tokens[c.key]), "", c.headers...)
		if r.status != c.want || !strings.Contains(r.body, c.text) {
			t.Errorf("%s with the key of %s: got %d %s, want %d %s", c.target, c.key, r.status, r.body, c.want, c.text)
		}
		if leak := b.secretIn(r.body); leak != "" {
			t.Errorf("%s: the answer holds the secret of %s", c.target, leak)
		}
		if r.header.Get("Referrer-Policy") != "no-referrer" {
			t.Errorf("%s: no Referrer-Policy", c.target)
		}
	}
	if leak := b.secretIn(b.log.String()); leak != "" {
		t.Errorf("the log holds the secret of %s", leak)
	}
	for _, want := range []string{`"face":"sheet"`, `"msg":"refused"`, `"principal":"reader"`, `"msg":"sheet"`, `"path":"/sheet/limit/nitrate/centre","status":200`} {
		if !strings.Contains(b.log.String(), want) {
			t.Errorf("the log has no %s", want)
		}
	}
}

// secretIn names the principal whose secret stands in a text.
func (b *bench) secretIn(text string) string {
	for who, token := range b.tokens {
		if secret := token[strings.LastIndex(token, "_")+1:]; len(secret) > 20 && strings.Contains(text, secret) {
			return who
		}
	}
	return ""
}

// clock is a clock that moves when told to.
type clock struct {
	mu sync.Mutex
	t  time.Time
}

func (c *clock) now() time.Time { c.mu.Lock(); defer c.mu.Unlock(); return c.t }

func (c *clock) forward(d time.Duration) { c.mu.Lock(); defer c.mu.Unlock(); c.t = c.t.Add(d) }

// TestTheRateOfReads empties the bucket of one key: it is told when to come again, others are not slowed, nor is posting.
func TestTheRateOfReads(t *testing.T) {
	c := &clock{t: time.Now()}
	b := newBench(t, server.Options{Now: c.now, SheetRate: 2, SheetBurst: 5})
	read := func(as string) reply { return b.ask(as, http.MethodGet, "limit/nitrate/centre", "") }
	for i := range 5 {
		if r := read("reader"); r.status != 200 {
			t.Fatalf("read %d: %d %s", i, r.status, r.body)
		}
	}
	if r := read("reader"); r.status != 429 || r.header.Get("Retry-After") != "1" || !strings.Contains(r.body, "more than 5 cells at once and 2 a second") {
		t.Errorf("the sixth read: %d, Retry-After %q, %s", r.status, r.header.Get("Retry-After"), r.body)
	}
	if r := b.ask("reader", http.MethodPost, "judge/nitrate", "value\n10\n"); r.status != 429 {
		t.Errorf("judging counts as reading: %d", r.status)
	}
	if r := read("author"); r.status != 200 {
		t.Errorf("another key: %d %s", r.status, r.body)
	}
	for range 5 {
		read("poster")
	}
	if r := read("poster"); r.status != 429 {
		t.Errorf("the poster's reads: %d", r.status)
	}
	for i := range 20 {
		if r := b.post("results/nitrate?source=s", "id,time,value\n"+string(rune('a'+i))+",2026-03-02T09:30:00Z,10\n"); r.status != 200 {
			t.Fatalf("post %d: %d %s", i, r.status, r.body)
		}
	}
	c.forward(time.Second)
	for i, want := range []int{200, 200, 429} {
		if r := read("reader"); r.status != want {
			t.Errorf("read %d after a second: %d, want %d", i, r.status, want)
		}
	}
}
