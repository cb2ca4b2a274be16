package server

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"regexp"
	"strings"

	"github.com/grpc-ecosystem/grpc-gateway/v2/runtime"
	"google.golang.org/protobuf/encoding/protojson"
	"google.golang.org/protobuf/proto"
)

// strictJSON is the JSON of the REST face: unknown fields are refused, and so is anything after the message; zero values
// are written, absent numbers are not.
type strictJSON struct{}

var (
	jsonOut = protojson.MarshalOptions{EmitDefaultValues: true}
	jsonIn  = protojson.UnmarshalOptions{}
)

// ContentType implements runtime.Marshaler.
func (strictJSON) ContentType(any) string { return "application/json" }

// Marshal implements runtime.Marshaler.
func (strictJSON) Marshal(v any) ([]byte, error) {
	if m, ok := v.(proto.Message); ok {
		return jsonOut.Marshal(m)
	}
	return json.Marshal(v)
}

// Unmarshal implements runtime.Marshaler.
func (strictJSON) Unmarshal(data []byte, v any) error {
	m, ok := v.(proto.Message)
	if !ok {
		return json.Unmarshal(data, v)
	}
	if err := jsonIn.Unmarshal(data, m); err != nil {
		return errors.New(jsonProblem(err))
	}
	return nil
}

// NewDecoder implements runtime.Marshaler. The body is read to its end, so that nothing after the message goes unseen.
func (j strictJSON) NewDecoder(r io.Reader) runtime.Decoder {
	return runtime.DecoderFunc(func(v any) error {
		data, err := wholeBody(r)
		if err != nil {
			return err
		}
		if len(data) == 0 {
			return io.EOF // an empty body is an empty message
		}
		return j.Unmarshal(data, v)
	})
}

// wholeBody gives the bytes of a body, without copying those that are in memory.
func wholeBody(r io.Reader) ([]byte, error) {
	if b, ok := r.(*body); ok {
		return b.bytes, nil
	}
	return io.ReadAll(r)
}

// NewEncoder implements runtime.Marshaler.
func (j strictJSON) NewEncoder(w io.Writer) runtime.Encoder {
	return runtime.EncoderFunc(func(v any) error {
		data, err := j.Marshal(v)
		if err == nil {
			_, err = w.Write(data)
		}
		return err
	})
}

// Delimiter implements runtime.Delimited.
func (strictJSON) Delimiter() []byte { return []byte("\n") }

// jsonProblem says what is wrong with a body, in the words of the decoder without its name.
func jsonProblem(err error) string {
	text := strings.ReplaceAll(err.Error(), "\u00a0", " ") // the decoder varies its spaces
	text = strings.TrimPrefix(text, "proto: ")
	return fmt.Sprintf("the body is not the JSON of this call: %s", text)
}

// misread are the words of the gateway and of Go about a path or query parameter that has not the form of its type.
var misread = regexp.MustCompile(`^(?:type mismatch, parameter: ([a-z0-9_.]+), error: )?(?:parsing (?:field|list) "([a-z0-9_]+)": )?` +
	`strconv\.Parse(Int|Uint|Float|Bool): parsing ("(?:[^"\\]|\\.)*"): (.*)$`)

var wantedForms = map[string]string{"Int": "a whole number", "Uint": "a whole number of at least 0", "Float": "a number", "Bool": "true or false"}

// parameterProblem says what is wrong with a path or query parameter; field is empty where the text is of something else.
func parameterProblem(text string) (field, problem string) {
	m := misread.FindStringSubmatch(text)
	if m == nil {
		return "", ""
	}
	if field = m[1]; field == "" {
		field = m[2]
	}
	if m[5] == "value out of range" {
		return field, m[4] + ": is too large or too small"
	}
	return field, m[4] + ": want " + wantedForms[m[3]]
}

var unknownField = regexp.MustCompile(`unknown field "([^"]+)"`)

// fieldInProblem names the field that a decoding problem is about, if it says so.
func fieldInProblem(text string) string {
	if m := unknownField.FindStringSubmatch(text); m != nil {
		return m[1]
	}
	return ""
}
