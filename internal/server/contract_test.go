package server_test

import (
	"context"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"reflect"
	"slices"
	"strconv"
	"strings"
	"testing"

	"google.golang.org/grpc/codes"

	"limitary/internal/server"
)

// step is one call of a case file and what it must come to. The same file is run over gRPC and over REST, each on a
// database of its own.
type step struct {
	Name string
	// As is who calls: a principal of the cast, or "" for nobody.
	As   string
	Call string
	// Request is the call's JSON. "${name}" in a string stands for what an earlier step saved; {"$repeat": n, "of": x} for
	// a list of n times x, "#" in its strings for the index; {"$text": n} for a text of n letters.
	Request json.RawMessage
	// Raw is a request as it stands, for what only HTTP can get wrong.
	Raw  *struct{ Method, Path, Body string }
	Want struct {
		Code string
		// HTTP is the status over REST.
		HTTP   int
		Reason string
		Field  string
		// Text must be part of the message.
		Text string
		// Body must be part of the answer: its fields, and lists element by element. "$any" is anything but nothing.
		Body any
	}
	// Save keeps parts of the answer by their path, such as "version.digest".
	Save map[string]string
}

func TestContract(t *testing.T) {
	files, err := filepath.Glob("testdata/contract/*.json")
	if err != nil || len(files) == 0 {
		t.Fatalf("no case files: %v", err)
	}
	for _, file := range files {
		data, err := os.ReadFile(file)
		if err != nil {
			t.Fatal(err)
		}
		var steps []step
		d := json.NewDecoder(strings.NewReader(string(data)))
		d.DisallowUnknownFields()
		if err := d.Decode(&steps); err != nil {
			t.Fatalf("%s: %v", file, err)
		}
		for i := range 2 {
			name := strings.TrimSuffix(filepath.Base(file), ".json") + "/" + []string{"grpc", "rest"}[i]
			t.Run(name, func(t *testing.T) {
				f := newFixture(t, server.Options{BodyBytesMax: 8 << 20})
				runSteps(t, f, f.transports(t)[i], steps)
				for _, token := range f.tokens {
					if secret := token[strings.LastIndex(token, "_")+1:]; len(secret) > 20 && strings.Contains(f.log.String(), secret) {
						t.Error("the log holds the secret of a key")
					}
				}
			})
		}
	}
}

func runSteps(t *testing.T, f *fixture, over transport, steps []step) {
	saved := map[string]any{}
	for _, s := range steps {
		if s.Raw != nil && over.name() == "grpc" {
			continue
		}
		got, err := s.run(f, over, saved)
		if err != nil {
			t.Fatalf("%s: %v", s.Name, err)
		}
		s.check(t, got, saved)
		for name, path := range s.Save {
			v, ok := at(got.body, path)
			if !ok {
				t.Fatalf("%s: the answer has no %s: %v", s.Name, path, got.body)
			}
			saved[name] = v
		}
	}
}

func (s *step) run(f *fixture, over transport, saved map[string]any) (outcome, error) {
	if s.Raw != nil {
		body := []byte(fill(s.Raw.Body, saved, 0).(string))
		if n, err := strconv.Atoi(strings.TrimPrefix(s.Raw.Body, "$bytes:")); err == nil {
			body = []byte(`{"detail": "` + strings.Repeat("x", n-14) + `"}`)
		}
		return f.do(context.Background(), s.As, s.Raw.Method, s.Raw.Path, body)
	}
	var request any = map[string]any{}
	if s.Request != nil {
		if err := json.Unmarshal(s.Request, &request); err != nil {
			return outcome{}, err
		}
	}
	data, err := json.Marshal(fill(request, saved, -1))
	if err != nil {
		return outcome{}, err
	}
	return over.call(context.Background(), s.As, s.Call, data)
}

func (s *step) check(t *testing.T, got outcome, saved map[string]any) {
	t.Helper()
	bad := func(what string, got, want any) {
		t.Helper()
		t.Errorf("%s: got %s %v, want %v", s.Name, what, got, want)
	}
	var code codes.Code
	if err := code.UnmarshalJSON([]byte(strconv.Quote(s.Want.Code))); err != nil {
		t.Fatalf("%s: %v", s.Name, err)
	}
	if got.code != code {
		bad("code", fmt.Sprintf("%s (%s)", got.code, got.message), code)
	}
	if want := s.wantHTTP(); got.http != 0 && got.http != want {
		bad("HTTP status", got.http, want)
	}
	reason := s.Want.Reason
	if reason != "" {
		reason = "ERROR_REASON_" + reason
	}
	if got.reason != reason {
		bad("reason", fmt.Sprintf("%q (%s)", got.reason, got.message), reason)
	}
	if s.Want.Field != "" && !slices.Equal(got.fields, []string{s.Want.Field}) {
		bad("fields", fmt.Sprintf("%q (%s)", got.fields, got.message), s.Want.Field)
	}
	if !strings.Contains(got.message, s.Want.Text) {
		bad("message", got.message, s.Want.Text)
	}
	if code != codes.OK && got.requestID == "" {
		bad("request id", "none", "one")
	}
	if why := differs(got.body, fill(s.Want.Body, saved, -1), ""); s.Want.Body != nil && why != "" {
		t.Errorf("%s: %s", s.Name, why)
	}
}

func (s *step) wantHTTP() int {
	if s.Want.HTTP == 0 && s.Want.Code == "OK" {
		return 200
	}
	return s.Want.HTTP
}

// fill puts in what was saved and repeats what is to be repeated.
func fill(v any, saved map[string]any, index int) any {
	switch v := v.(type) {
	case string:
		if name, whole := strings.CutPrefix(v, "${"); whole && strings.Count(v, "${") == 1 && strings.HasSuffix(v, "}") {
			if value, ok := saved[strings.TrimSuffix(name, "}")]; ok {
				return value
			}
		}
		for name, value := range saved {
			v = strings.ReplaceAll(v, "${"+name+"}", fmt.Sprint(value))
		}
		if index >= 0 {
			v = strings.ReplaceAll(v, "#", strconv.Itoa(index))
		}
		return v
	case []any:
		out := make([]any, len(v))
		for i := range v {
			out[i] = fill(v[i], saved, index)
		}
		return out
	case map[string]any:
		if n, ok := v["$text"].(float64); ok {
			return strings.Repeat("x", int(n))
		}
		if n, ok := v["$repeat"].(float64); ok {
			out := make([]any, int(n))
			for i := range out {
				out[i] = fill(v["of"], saved, i)
			}
			return out
		}
		out := make(map[string]any, len(v))
		for name, each := range v {
			out[fill(name, saved, index).(string)] = fill(each, saved, index)
		}
		return out
	}
	return v
}

// at finds a part of an answer by its path.
func at(v any, path string) (any, bool) {
	for part := range strings.SplitSeq(path, ".") {
		switch w := v.(type) {
		case map[string]any:
			v = w[part]
		case []any:
			i, err := strconv.Atoi(part)
			if err != nil || i >= len(w) {
				return nil, false
			}
			v = w[i]
		default:
			return nil, false
		}
	}
	return v, v != nil
}

// differs says where got does not hold what is wanted; "" where it does.
func differs(got, want any, path string) string {
	switch want := want.(type) {
	case map[string]any:
		g, ok := got.(map[string]any)
		if !ok {
			return fmt.Sprintf("got %s %v, want %v", path, got, want)
		}
		for name, each := range want {
			if each == nil { // null: the field must be absent
				if g[name] != nil {
					return fmt.Sprintf("got %s.%s %v, want none", path, name, g[name])
				}
				continue
			}
			if why := differs(g[name], each, path+"."+name); why != "" {
				return why
			}
		}
		return ""
	case []any:
		g, ok := got.([]any)
		if !ok || len(g) != len(want) {
			return fmt.Sprintf("got %s %v, want %v", path, got, want)
		}
		for i := range want {
			if why := differs(g[i], want[i], fmt.Sprintf("%s[%d]", path, i)); why != "" {
				return why
			}
		}
		return ""
	case string:
		if want == "$any" && got != nil && got != "" {
			return ""
		}
	}
	if !reflect.DeepEqual(got, want) {
		return fmt.Sprintf("got %s %v, want %v", path, got, want)
	}
	return ""
}
