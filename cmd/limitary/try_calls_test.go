package main

import (
	"io"
	"net/http"
	"regexp"
	"strings"
	"testing"
)

// call is a curl command line, as it is printed.
type call struct {
	url, body string
	header    http.Header
}

// callsIn reads the curl commands of a text: each begins a line and ends before an empty one.
func callsIn(t *testing.T, text string) []call {
	t.Helper()
	var out []call
	for _, command := range regexp.MustCompile(`(?ms)^curl .*?\n\n`).FindAllString(text, -1) {
		out = append(out, parseCurl(t, shellWords(t, command)))
	}
	return out
}

func parseCurl(t *testing.T, words []string) call {
	t.Helper()
	c := call{header: http.Header{}}
	for i := 1; i < len(words); i++ {
		switch words[i] {
		case "-sS":
		case "-w":
			i++
		case "-H":
			i++
			name, value, ok := strings.Cut(words[i], ": ")
			if !ok {
				t.Fatalf("header %q", words[i])
			}
			c.header.Set(name, value)
		case "-d":
			i++
			c.body = words[i]
			c.header.Set("Content-Type", "application/x-www-form-urlencoded") // what curl sends with -d
		default:
			if c.url != "" || !strings.HasPrefix(words[i], "http://") {
				t.Fatalf("curl has the word %q", words[i])
			}
			c.url = words[i]
		}
	}
	return c
}

// shellWords splits a command as a shell would, as far as the printed ones go: single quotes, and lines that go on.
func shellWords(t *testing.T, command string) []string {
	t.Helper()
	var words []string
	var word strings.Builder
	quoted, begun := false, false
	command = strings.ReplaceAll(command, "\\\n", " ")
	if strings.Contains(strings.ReplaceAll(command, `'\n'`, ""), `\`) || strings.Contains(command, "$") {
		t.Fatalf("%q needs more of a shell than this test has", command)
	}
	for _, r := range command {
		switch {
		case r == '\'':
			quoted, begun = !quoted, true
		case !quoted && (r == ' ' || r == '\n'):
			if begun {
				words = append(words, word.String())
			}
			word.Reset()
			begun = false
		case !quoted && strings.ContainsRune(`&;|<>()"?*`, r):
			t.Fatalf("%q has %q outside quotes, which a shell takes for itself", command, r)
		default:
			word.WriteRune(r)
			begun = true
		}
	}
	if quoted {
		t.Fatalf("%q has an open quote", command)
	}
	return words
}

// do sends the call and gives the answer, which must be a good one.
func (c call) do(t *testing.T) string {
	t.Helper()
	method := http.MethodGet
	if c.body != "" {
		method = http.MethodPost
	}
	req, err := http.NewRequestWithContext(t.Context(), method, c.url, strings.NewReader(c.body))
	if err != nil {
		t.Fatal(err)
	}
	req.Header = c.header
	res, err := http.DefaultClient.Do(req)
	if err != nil {
		t.Fatal(err)
	}
	defer res.Body.Close()
	answer, err := io.ReadAll(res.Body)
	if err != nil || res.StatusCode != http.StatusOK {
		t.Fatalf("%s %s: got %s %q, %v", method, c.url, res.Status, answer, err)
	}
	return string(answer)
}
