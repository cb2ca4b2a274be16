package book

import (
	"strings"

	"limitary/internal/sheet/block"
)

// text makes a text fit for a cell: guarded, without what the format's XML cannot hold, and not too long.
func text(s string) string {
	s = strings.Map(func(r rune) rune {
		switch {
		case r < ' ' && r != '\t' && r != '\n' && r != '\r', r == '\ufffe', r == '\uffff':
			return -1
		}
		return r
	}, strings.ToValidUTF8(s, "\ufffd"))
	if s = block.Guard(s); len(s) > cellCharsMax {
		s = strings.ToValidUTF8(s[:cellCharsMax], "")
	}
	return s
}
