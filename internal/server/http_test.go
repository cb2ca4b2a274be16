package server

import (
	"bufio"
	"bytes"
	"fmt"
	"net"
	"net/http"
	"testing"
	"time"

	"limitary/service"
)

// TestALongBodyIsReadOnlyForAValidKey sends the head of a call and none of its body: only a server that does not wait for
// the body answers.
func TestALongBodyIsReadOnlyForAValidKey(t *testing.T) {
	h := start(t, Options{}, fine, fine)
	_, unknown, _, err := service.NewToken(bytes.NewReader(bytes.Repeat([]byte{7}, 64)))
	if err != nil {
		t.Fatal(err)
	}
	for name, length := range map[string]string{
		"a length of a megabyte": "Content-Length: 1000000",
		"no length":              "Transfer-Encoding: chunked",
	} {
		t.Run(name, func(t *testing.T) {
			conn, err := net.Dial("tcp", h.HTTPAddress())
			if err != nil {
				t.Fatal(err)
			}
			defer conn.Close()
			if err := conn.SetDeadline(time.Now().Add(time.Minute)); err != nil {
				t.Fatal(err)
			}
			fmt.Fprintf(conn, "POST /v1/evaluations:batch HTTP/1.1\r\nHost: limitary\r\nAuthorization: Bearer %s\r\n%s\r\n\r\n", unknown, length)
			resp, err := http.ReadResponse(bufio.NewReader(conn), nil)
			if err != nil {
				t.Fatal(err)
			}
			defer resp.Body.Close()
			if resp.StatusCode != http.StatusUnauthorized || !resp.Close {
				t.Errorf("got %s, connection closed: %t; want 401 and closed", resp.Status, resp.Close)
			}
		})
	}
}

func TestParametersThatAreNotOfTheirType(t *testing.T) {
	for text, want := range map[string][2]string{
		`type mismatch, parameter: version, error: strconv.ParseInt: parsing "two": invalid syntax`: {"version", `"two": want a whole number`},
		`parsing field "page_size": strconv.ParseInt: parsing "9e9": invalid syntax`:                {"page_size", `"9e9": want a whole number`},
		`parsing field "x": strconv.ParseUint: parsing "-1": invalid syntax`:                        {"x", `"-1": want a whole number of at least 0`},
		`parsing list "xs": strconv.ParseFloat: parsing "a\"b": invalid syntax`:                     {"xs", `"a\"b": want a number`},
		`parsing field "all": strconv.ParseBool: parsing "si": invalid syntax`:                      {"all", `"si": want true or false`},
		`parsing field "n": strconv.ParseInt: parsing "99999999999": value out of range`:            {"n", `"99999999999": is too large or too small`},
		`the body is not the JSON of this call: unknown field "x"`:                                  {"", ""},
	} {
		if field, problem := parameterProblem(text); field != want[0] || problem != want[1] {
			t.Errorf("%s: got %q, %q, want %q", text, field, problem, want)
		}
	}
}
