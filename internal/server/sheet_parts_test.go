package server

import (
	"bufio"
	"bytes"
	"context"
	"errors"
	"fmt"
	"log/slog"
	"net"
	"net/http"
	"net/http/httptest"
	"strings"
	"testing"
	"time"

	"limitary/service"
)

// fullSheets has no room for a read nor for a post.
func fullSheets(log *slog.Logger) *sheets {
	o := Options{Log: log, SheetRate: 1, SheetBurst: 100}
	o.fill()
	f := &sheets{server: &Server{options: o}, reads: newBuckets(1, 100, time.Now), patience: time.Millisecond,
		reading: make(chan struct{}, 1), tables: make(chan struct{}, 1), posting: make(chan struct{}, 1), long: make(chan struct{}, 1)}
	f.reading <- struct{}{}
	f.posting <- struct{}{}
	return f
}

// TestReadsAndPostsHaveRoomsOfTheirOwn fills one room at a time.
func TestReadsAndPostsHaveRoomsOfTheirOwn(t *testing.T) {
	f := fullSheets(nil)
	read, post := httptest.NewRequest(http.MethodGet, "/sheet/state/a", nil), httptest.NewRequest(http.MethodPost, "/sheet/results/a", nil)
	for r, want := range map[*http.Request]int{read: 503, post: 429} {
		var fault *sheetFault
		if _, err := f.room(r); !errors.As(err, &fault) || fault.status != want || fault.wait <= 0 {
			t.Errorf("%s without room: got %v, want %d and a time to wait", r.Method, err, want)
		}
	}
	<-f.posting
	done, err := f.room(post)
	if err != nil || len(f.posting) != 1 {
		t.Fatalf("a post while reads have no room: %v", err)
	}
	if done(); len(f.posting) != 0 {
		t.Error("a post that is done keeps its room")
	}
	for _, table := range []*http.Request{httptest.NewRequest(http.MethodGet, "/sheet/limits.csv", nil), httptest.NewRequest(http.MethodPost, "/sheet/judge/a", nil)} {
		done, err := f.room(table)
		if err != nil || len(f.tables) != 1 {
			t.Fatalf("%s while cells have no room: %v", table.URL.Path, err)
		}
		done()
	}
	gone, cancel := context.WithCancel(t.Context())
	cancel()
	f.patience = time.Hour
	if _, err := f.room(read.WithContext(gone)); !errors.Is(err, context.Canceled) {
		t.Errorf("a caller who went away: %v", err)
	}
}

// TestAFaultOfASheetIsToldInGeneralWords has the handler panic.
func TestAFaultOfASheetIsToldInGeneralWords(t *testing.T) {
	var log bytes.Buffer
	f := fullSheets(NewLog(&log, slog.LevelInfo))
	<-f.reading
	f.sheet = http.HandlerFunc(func(http.ResponseWriter, *http.Request) { panic("a secret cause") })
	_, token, _, err := service.NewToken(bytes.NewReader(bytes.Repeat([]byte{7}, 64)))
	if err != nil {
		t.Fatal(err)
	}
	r := httptest.NewRequest(http.MethodGet, "/sheet/state/a", nil)
	r.Header.Set("Authorization", "Bearer "+token)
	r.Header.Set(requestIDHeader, "id-7")
	w := httptest.NewRecorder()
	f.ServeHTTP(w, r)
	if w.Code != 500 || !strings.Contains(w.Body.String(), "id-7") || strings.Contains(w.Body.String(), "secret") {
		t.Errorf("got %d %s", w.Code, w.Body)
	}
	if !strings.Contains(log.String(), "a secret cause") || len(f.reading) != 0 {
		t.Errorf("the log has %s, and %d reads are in work", log.String(), len(f.reading))
	}
}

// TestALongBlockIsReadOnlyForAValidKey sends the head of a post and none of its body.
func TestALongBlockIsReadOnlyForAValidKey(t *testing.T) {
	h := start(t, Options{}, fine, fine)
	_, unknown, _, err := service.NewToken(bytes.NewReader(bytes.Repeat([]byte{7}, 64)))
	if err != nil {
		t.Fatal(err)
	}
	for head, want := range map[string]int{"Content-Length: 100": 401, "Content-Length: 1000000": 401, "Transfer-Encoding: chunked": 401, "Content-Length: 9000000": 413} {
		conn, err := net.Dial("tcp", h.HTTPAddress())
		if err != nil {
			t.Fatal(err)
		}
		defer conn.Close()
		if err := conn.SetDeadline(time.Now().Add(time.Minute)); err != nil {
			t.Fatal(err)
		}
		fmt.Fprintf(conn, "POST /sheet/results/nitrate HTTP/1.1\r\nHost: limitary\r\nAuthorization: Bearer %s\r\n%s\r\n\r\n", unknown, head)
		resp, err := http.ReadResponse(bufio.NewReader(conn), nil)
		if err != nil {
			t.Fatal(err)
		}
		_ = resp.Body.Close()
		if resp.StatusCode != want || !resp.Close {
			t.Errorf("%s: got %s, connection closed: %t; want %d and closed", head, resp.Status, resp.Close, want)
		}
	}
}

// TestWhoeverIsSlowToSendHoldsNoRoom opens a request whose short body does not come, where there is room for one call only.
func TestWhoeverIsSlowToSendHoldsNoRoom(t *testing.T) {
	h := start(t, Options{CallsMax: 1}, fine, fine)
	_, unknown, _, err := service.NewToken(bytes.NewReader(bytes.Repeat([]byte{7}, 64)))
	if err != nil {
		t.Fatal(err)
	}
	conn, err := net.Dial("tcp", h.HTTPAddress())
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close()
	fmt.Fprintf(conn, "POST /v1/results:post HTTP/1.1\r\nHost: limitary\r\nAuthorization: Bearer %s\r\nContent-Length: 100\r\n\r\n{", unknown)
	for range 20 { // the slow one may come to its slot after the first of these
		req, err := http.NewRequestWithContext(t.Context(), http.MethodPost, "http://"+h.HTTPAddress()+"/v1/results:post", strings.NewReader("{}"))
		if err != nil {
			t.Fatal(err)
		}
		req.Header.Set("Authorization", "Bearer "+unknown)
		resp, err := http.DefaultClient.Do(req)
		if err != nil {
			t.Fatal(err)
		}
		_ = resp.Body.Close()
		if resp.StatusCode == http.StatusTooManyRequests {
			t.Fatalf("beside a slow sender: got %s", resp.Status)
		}
	}
}

func TestTakeKey(t *testing.T) {
	for raw, want := range map[string][3]string{
		"":                      {"", "", "false"},
		"key=abc":               {"abc", "", "true"},
		"lot=a&key=abc&value=1": {"abc", "lot=a&value=1", "true"},
		"key=a%5Fb&x=1;2":       {"a_b", "x=1;2", "true"},
		"key=a&key=b":           {"b", "", "true"},
		"monkey=abc&keys=a/b":   {"", "monkey=abc&keys=a/b", "false"},
	} {
		r := httptest.NewRequest(http.MethodGet, "/sheet/x", nil)
		r.URL.RawQuery = raw
		key, given := takeKey(r.URL)
		if got := [3]string{key, r.URL.RawQuery, fmt.Sprint(given)}; got != want {
			t.Errorf("%s: got %q, want %q", raw, got, want)
		}
	}
}
