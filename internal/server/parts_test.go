package server

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"log/slog"
	"net/url"
	"os"
	"regexp"
	"strings"
	"sync/atomic"
	"testing"
	"time"
)

const someToken = "lim_abcdefghijklmnop_abcdefghijklmnopqrstuvwxyz234567abcdefghijklmnopqrst"

func TestSecretsAreKeptOutOfTheLog(t *testing.T) {
	for text, want := range map[string]string{
		"key " + someToken + " is wrong":          "key lim_abcdefghijklmnop_redacted is wrong",
		"Authorization: Bearer " + someToken:      "Authorization: Bearer redacted",
		"authorization: BEARER abc.def":           "authorization: BEARER redacted",
		"host=/run user=x password=hunter2 db=y":  "host=/run user=x password=redacted db=y",
		"dial postgres://app:hunter2@db:5432/lim": "dial postgres://app:redacted@db:5432/lim",
		"version 3 of nitrate":                    "version 3 of nitrate",
	} {
		if got := Redact(text); got != want {
			t.Errorf("got  %q\nwant %q", got, want)
		}
	}
	var out bytes.Buffer
	NewLog(&out, slog.LevelInfo).With("token", someToken).Info("a key, "+someToken, "Authorization", "Basic abc", "cause", errors.New("Bearer "+someToken),
		slog.Group("request", "text", someToken))
	if strings.Contains(out.String(), someToken[21:]) || strings.Contains(out.String(), "Basic abc") {
		t.Errorf("a secret is in %s", &out)
	}
	if !json.Valid(out.Bytes()) {
		t.Errorf("no JSON: %s", &out)
	}
}

func TestListeningBeyondTheMachineNeedsTLSOrAWord(t *testing.T) {
	for address, local := range map[string]bool{
		"127.0.0.1:7410": true, "127.8.8.8:1": true, "[::1]:7410": true, "localhost:7410": true,
		"0.0.0.0:7410": false, ":7410": false, "[::]:7410": false, "10.0.0.7:7410": false, "example.org:7410": false,
	} {
		for _, o := range []Options{{HTTPAddress: address, GRPCAddress: "127.0.0.1:0"}, {HTTPAddress: "127.0.0.1:0", GRPCAddress: address}} {
			if _, err := o.transport(); (err == nil) != local {
				t.Errorf("%s: got %v, local %t", address, err, local)
			}
			o.BehindProxy = true
			if _, err := o.transport(); err != nil {
				t.Errorf("%s behind a proxy: %v", address, err)
			}
		}
	}
	for _, o := range []Options{
		{HTTPAddress: "7410", GRPCAddress: "127.0.0.1:0"}, {HTTPAddress: "127.0.0.1:0", GRPCAddress: "127.0.0.1:0", TLSCert: "x"},
		{HTTPAddress: "127.0.0.1:0", GRPCAddress: "127.0.0.1:0", TLSCert: "no.pem", TLSKey: "no.key"},
	} {
		if _, err := o.transport(); err == nil {
			t.Errorf("%+v is taken", o)
		}
	}
}

func TestEveryRESTCallIsInTheTableOfQueryParameters(t *testing.T) {
	table, err := newQueryTable()
	if err != nil {
		t.Fatal(err)
	}
	data, err := os.ReadFile("../../proto/limitary/v1/limitary_gateway.yaml")
	if err != nil {
		t.Fatal(err)
	}
	rules := regexp.MustCompile(`(get|post|patch): "([^"]+)"`).FindAllStringSubmatch(string(data), -1)
	if len(rules) != len(table) {
		t.Errorf("the gateway has %d calls, the OpenAPI document %d", len(rules), len(table))
	}
	for _, r := range rules {
		known, there := table[routeKey(r[1], r[2])]
		if !there {
			t.Errorf("%s %s is not in the OpenAPI document", r[1], r[2])
		}
		if r[1] != "get" && len(known) > 0 {
			t.Errorf("%s %s takes its fields in the body, and has the parameters %q", r[1], r[2], known)
		}
		if name, _ := table.unknown(strings.ToUpper(r[1]), r[2], url.Values{"pageSize": nil, "zz": nil, "aa": nil}); name != "aa" {
			t.Errorf("%s %s: got %q unknown, want aa", r[1], r[2], name)
		}
	}
}

func TestASharedLookupNeverAnswersWithWhatWasAskedBefore(t *testing.T) {
	const callers = 50
	s := newShared[string, int64](time.Minute)
	var begun, current atomic.Int64
	first, release := make(chan struct{}), make(chan struct{})
	find := func(context.Context) (int64, error) {
		v := current.Load()
		if begun.Add(1) == 1 {
			close(first)
			<-release
		}
		return v, nil
	}
	early := make(chan int64, 1)
	go func() { v, _ := s.do(context.Background(), "k", find); early <- v }()
	<-first
	current.Store(1) // what is looked up changes while the first look-up runs
	late := make(chan int64, callers)
	for range callers {
		l := s.join("k", find) // joined before the first one ends
		go func() { <-l.done; late <- l.value }()
	}
	close(release)
	if got := <-early; got != 0 {
		t.Errorf("the first caller got %d, want what was there when it asked", got)
	}
	for range callers {
		if got := <-late; got != 1 {
			t.Fatalf("a later caller got %d, from before it came", got)
		}
	}
	if got := begun.Load(); got != 2 {
		t.Errorf("%d look-ups for %d callers, want 2", got, callers+1)
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	if len(s.groups) > 1 {
		t.Errorf("%d groups are left", len(s.groups))
	}
}

func TestACallerWhoLeavesDoesNotEndTheLookup(t *testing.T) {
	s := newShared[string, int](time.Minute)
	entered, release := make(chan struct{}), make(chan struct{})
	find := func(ctx context.Context) (int, error) {
		entered <- struct{}{}
		<-release
		return 7, ctx.Err()
	}
	ctx, cancel := context.WithCancel(context.Background())
	gone := make(chan error, 1)
	go func() { _, err := s.do(ctx, "k", find); gone <- err }()
	<-entered
	cancel()
	if err := <-gone; !errors.Is(err, context.Canceled) {
		t.Errorf("got %v", err)
	}
	l := s.join("k", find)
	close(release)
	<-entered
	if <-l.done; l.value != 7 || l.err != nil {
		t.Errorf("got %d, %v", l.value, l.err)
	}
}

func TestCredentials(t *testing.T) {
	for header, ok := range map[string]bool{
		"Bearer " + someToken: true, "bearer " + someToken: true, "Bearer  " + someToken + " ": true,
		"": false, someToken: false, "Basic " + someToken: false, "Bearer": false, "Bearer ": false, "Bearer " + someToken[:40]: false,
	} {
		id, hash, err := credentialsOf(header)
		if (err == nil) != ok || ok && (id != "abcdefghijklmnop" || len(hash) != 32) {
			t.Errorf("%q: got id %q, %d bytes, %v", strings.ReplaceAll(header, someToken, "TOKEN"), id, len(hash), err)
		}
		if err != nil && strings.Contains(fmt.Sprint(err), someToken[21:40]) {
			t.Errorf("the error holds the secret: %v", err)
		}
	}
}
