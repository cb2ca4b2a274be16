package server_test

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"net/http"
	"net/url"
	"os"
	"regexp"
	"strings"
	"testing"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	spb "google.golang.org/genproto/googleapis/rpc/status"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/metadata"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/encoding/protojson"
	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/reflect/protoreflect"
	"google.golang.org/protobuf/reflect/protoregistry"
)

// outcome is what a call came to, over either transport.
type outcome struct {
	code            codes.Code
	http            int // 0 over gRPC
	reason, message string
	fields          []string
	requestID       string
	body            any // decoded JSON
}

// transport is one way to call a method of the contract. Call is like "LimitService/GetVersion", request its JSON.
type transport interface {
	name() string
	call(ctx context.Context, as, call string, request []byte) (outcome, error)
}

func (f *fixture) transports(tb testing.TB) []transport {
	return []transport{overGRPC{f}, overREST{f, gatewayRules(tb)}}
}

// method finds a method of the contract.
func method(call string) (protoreflect.MethodDescriptor, error) {
	d, err := protoregistry.GlobalFiles.FindDescriptorByName(protoreflect.FullName("limitary.v1." + strings.ReplaceAll(call, "/", ".")))
	if err != nil {
		return nil, err
	}
	m, ok := d.(protoreflect.MethodDescriptor)
	if !ok {
		return nil, fmt.Errorf("%s is no method", call)
	}
	return m, nil
}

func newMessage(d protoreflect.MessageDescriptor) (proto.Message, error) {
	t, err := protoregistry.GlobalTypes.FindMessageByName(d.FullName())
	if err != nil {
		return nil, err
	}
	return t.New().Interface(), nil
}

type overGRPC struct{ f *fixture }

func (overGRPC) name() string { return "grpc" }

func (g overGRPC) call(ctx context.Context, as, call string, request []byte) (outcome, error) {
	m, err := method(call)
	if err != nil {
		return outcome{}, err
	}
	in, err1 := newMessage(m.Input())
	out, err2 := newMessage(m.Output())
	if err := errors.Join(err1, err2); err != nil {
		return outcome{}, err
	}
	if err := protojson.Unmarshal(request, in); err != nil {
		return outcome{}, fmt.Errorf("the case's own request: %w", err)
	}
	if token := g.f.tokens[as]; token != "" {
		ctx = metadata.AppendToOutgoingContext(ctx, "authorization", "Bearer "+token)
	}
	err = g.f.conn.Invoke(ctx, "/limitary.v1."+call, in, out)
	return decode(status.Convert(err), out)
}

func decode(s *status.Status, m proto.Message) (outcome, error) {
	o := outcome{code: s.Code(), message: s.Message()}
	for _, d := range s.Details() {
		switch d := d.(type) {
		case *errdetails.ErrorInfo:
			o.reason = d.Reason
		case *errdetails.RequestInfo:
			o.requestID = d.RequestId
		case *errdetails.BadRequest:
			for _, v := range d.FieldViolations {
				o.fields = append(o.fields, v.Field)
			}
		}
	}
	if s.Code() != codes.OK {
		return o, nil
	}
	data, err := protojson.MarshalOptions{EmitDefaultValues: true}.Marshal(m)
	if err != nil {
		return o, err
	}
	return o, json.Unmarshal(data, &o.body)
}

// gatewayRule is the REST face of a method.
type gatewayRule struct{ verb, path string }

var ruleLine = regexp.MustCompile(`selector: limitary\.v1\.(\w+)\.(\w+), (get|post|patch): "([^"]+)"`)

// gatewayRules reads the REST faces from where they are defined.
func gatewayRules(tb testing.TB) map[string]gatewayRule {
	tb.Helper()
	data, err := os.ReadFile("../../proto/limitary/v1/limitary_gateway.yaml")
	if err != nil {
		tb.Fatal(err)
	}
	rules := map[string]gatewayRule{}
	for _, m := range ruleLine.FindAllStringSubmatch(string(data), -1) {
		rules[m[1]+"/"+m[2]] = gatewayRule{strings.ToUpper(m[3]), m[4]}
	}
	return rules
}

type overREST struct {
	f     *fixture
	rules map[string]gatewayRule
}

func (overREST) name() string { return "rest" }

func (r overREST) call(ctx context.Context, as, call string, request []byte) (outcome, error) {
	rule, ok := r.rules[call]
	if !ok {
		return outcome{}, fmt.Errorf("%s has no REST face", call)
	}
	path, query, body, err := rule.place(request)
	if err != nil {
		return outcome{}, err
	}
	return r.f.do(ctx, as, rule.verb, path+query, body)
}

var pathField = regexp.MustCompile(`\{(\w+)\}`)

// place spreads a request over path, query and body.
func (g gatewayRule) place(request []byte) (path, query string, body []byte, err error) {
	fields := map[string]json.RawMessage{}
	if err := json.Unmarshal(request, &fields); err != nil {
		return "", "", nil, err
	}
	path = pathField.ReplaceAllStringFunc(g.path, func(m string) string {
		name := camelCase(m[1 : len(m)-1])
		text := strings.Trim(string(fields[name]), `"`)
		delete(fields, name)
		return url.PathEscape(text)
	})
	if g.verb != http.MethodGet {
		body, err = json.Marshal(fields)
		return path, "", body, err
	}
	values := url.Values{}
	for name, raw := range fields {
		var list []json.RawMessage
		if json.Unmarshal(raw, &list) != nil {
			list = []json.RawMessage{raw}
		}
		for _, each := range list {
			values.Add(name, strings.Trim(string(each), `"`))
		}
	}
	if len(values) > 0 {
		query = "?" + values.Encode()
	}
	return path, query, nil, nil
}

func camelCase(name string) string {
	parts := strings.Split(name, "_")
	for i := 1; i < len(parts); i++ {
		parts[i] = strings.ToUpper(parts[i][:1]) + parts[i][1:]
	}
	return strings.Join(parts, "")
}

// do makes one HTTP request and reads its answer.
func (f *fixture) do(ctx context.Context, as, verb, target string, body []byte) (outcome, error) {
	req, err := http.NewRequestWithContext(ctx, verb, "http://"+f.server.HTTPAddress()+target, bytes.NewReader(body))
	if err != nil {
		return outcome{}, err
	}
	if token := f.tokens[as]; token != "" {
		req.Header.Set("Authorization", "Bearer "+token)
	}
	resp, err := http.DefaultClient.Do(req)
	if err != nil {
		return outcome{}, err
	}
	defer resp.Body.Close()
	data, err := io.ReadAll(resp.Body)
	if err != nil {
		return outcome{}, err
	}
	if resp.Header.Get("Content-Type") != "application/json" {
		return outcome{}, fmt.Errorf("%s %s answered %d with %q: %s", verb, target, resp.StatusCode, resp.Header.Get("Content-Type"), data)
	}
	o := outcome{}
	if resp.StatusCode != http.StatusOK {
		var s spb.Status
		if err := protojson.Unmarshal(data, &s); err != nil {
			return o, fmt.Errorf("the error is no google.rpc.Status: %w: %s", err, data)
		}
		if o, err = decode(status.FromProto(&s), nil); err != nil {
			return o, err
		}
		if o.code == codes.OK {
			return o, fmt.Errorf("HTTP %d with the code OK: %s", resp.StatusCode, data)
		}
		if id := resp.Header.Get("X-Request-Id"); id == "" || id != o.requestID {
			return o, fmt.Errorf("the header has request id %q, the error %q", id, o.requestID)
		}
	} else if err := json.Unmarshal(data, &o.body); err != nil {
		return o, err
	}
	o.http = resp.StatusCode
	return o, nil
}
