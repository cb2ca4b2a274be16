package server

import (
	"io"
	"log/slog"
	"regexp"
	"strings"
)

var (
	tokenInText  = regexp.MustCompile(`(lim_[a-z2-7]{16}_)[A-Za-z0-9]+`)
	bearerInText = regexp.MustCompile(`(?i)(bearer\s+)(?:lim_[a-z2-7]{16}_)?[A-Za-z0-9._~+/=-]+`)
	passwordText = regexp.MustCompile(`(?i)(password=)\S+|(://[^:/@\s]+:)[^@\s]+(@)`)
)

// Redact takes secrets out of a text: the secret part of tokens, whatever follows "Bearer", and passwords of databases.
func Redact(text string) string {
	// Each line of the log has a dozen texts, and hardly one a secret: looking is far cheaper than a regular expression.
	if containsFold(text, "bearer") {
		text = bearerInText.ReplaceAllString(text, "${1}redacted")
	}
	if strings.Contains(text, "lim_") {
		text = tokenInText.ReplaceAllString(text, "${1}redacted")
	}
	if containsFold(text, "password=") || strings.Contains(text, "://") {
		text = passwordText.ReplaceAllString(text, "${1}${2}redacted${3}")
	}
	return text
}

// containsFold looks for a word of lower-case ASCII letters in any case.
func containsFold(text, word string) bool {
	for i := 0; i+len(word) <= len(text); i++ {
		if text[i]|0x20 == word[0] && strings.EqualFold(text[i:i+len(word)], word) {
			return true
		}
	}
	return false
}

// NewLog makes a log of JSON lines from which secrets are kept out, wherever in a line they stand.
func NewLog(w io.Writer, level slog.Leveler) *slog.Logger {
	return slog.New(slog.NewJSONHandler(w, &slog.HandlerOptions{Level: level, ReplaceAttr: redactAttr}))
}

// secretNames are attributes whose value is never written.
var secretNames = map[string]bool{"authorization": true, "token": true, "secret": true, "password": true}

func redactAttr(_ []string, a slog.Attr) slog.Attr {
	if secretNames[strings.ToLower(a.Key)] {
		return slog.String(a.Key, "redacted")
	}
	switch a.Value.Kind() {
	case slog.KindString:
		a.Value = slog.StringValue(Redact(a.Value.String()))
	case slog.KindAny:
		if err, ok := a.Value.Any().(error); ok {
			a.Value = slog.StringValue(Redact(err.Error()))
		}
	}
	return a
}
