package resultfile

import (
	"bytes"
	"fmt"
	"time"
	"unicode/utf8"
)

// texts takes in the fields kept as text, for a row of its own or the first row of a subgroup.
func (b *builder) texts() error {
	t := b.table
	for _, c := range b.kept {
		field, err := b.text(c.at)
		if err != nil {
			return err
		}
		if err := b.keep(c.col, c.at, field); err != nil {
			return err
		}
		if c.at == b.cols.time {
			b.order(field)
		}
	}
	if b.cols.excluded >= 0 {
		reason, err := b.reason()
		if err != nil {
			return err
		}
		if err := b.keep(&t.exclude, b.cols.excluded, reason); err != nil {
			return err
		}
	}
	if b.cols.mark >= 0 {
		mark, err := b.breakHere()
		if err != nil {
			return err
		}
		t.breaks = append(t.breaks, mark)
	}
	return nil
}

// keptText is a column of texts and its place in a record.
type keptText struct {
	at  int
	col *text
}

// keptTexts lists the columns of texts that were chosen.
func (b *builder) keptTexts() (kept []keptText) {
	t := b.table
	for _, c := range []keptText{{b.cols.id, &t.id}, {b.cols.time, &t.time}, {b.cols.subgroup, &t.group}, {b.cols.material, &t.material}} {
		if c.at >= 0 {
			kept = append(kept, c)
		}
	}
	return kept
}

// keep adds a text to its column of the table.
func (b *builder) keep(c *text, column int, field []byte) error {
	if len(c.bytes)+len(field) > b.scan.bounds.textBytes {
		return &Error{Line: b.scan.recordLine, Column: b.cols.label(column),
			Problem: fmt.Sprintf("the texts of the column so far are longer than %d bytes, the limit", b.scan.bounds.textBytes), Advice: "split the file"}
	}
	c.add(field)
	return nil
}

// order notes the first time that goes back.
func (b *builder) order(field []byte) {
	if b.table.TimeBack > 0 {
		return
	}
	at, err := time.Parse(time.RFC3339, string(field))
	if err != nil {
		b.instant = time.Time{}
		return
	}
	if at.Before(b.instant) {
		b.table.TimeBack = b.scan.recordLine
	}
	b.instant = at
}

// text gives the field at i without spaces around.
func (b *builder) text(i int) ([]byte, error) {
	field := bytes.TrimSpace(b.scan.fields[i])
	if !utf8.Valid(field) {
		return nil, &Error{Line: b.scan.recordLine, Column: b.cols.label(i), Value: clip(field), Problem: "is not UTF-8 text", Advice: adviceText}
	}
	return field, nil
}

// yes reads a field that can only say yes or no.
func yes(field []byte) (value, ok bool) {
	switch string(bytes.ToLower(field)) {
	case "", "0", "no", "false":
		return false, true
	case "1", "yes", "true", "x":
		return true, true
	}
	return false, false
}

func (b *builder) breakHere() (bool, error) {
	field, err := b.text(b.cols.mark)
	if err != nil {
		return false, err
	}
	value, ok := yes(field)
	if !ok {
		return false, &Error{Line: b.scan.recordLine, Column: b.cols.label(b.cols.mark), Value: clip(field), Problem: "does not say whether a segment begins here",
			Advice: "write yes (or 1, true, x) or no (or 0, false, nothing)"}
	}
	return value, nil
}

func (b *builder) reason() ([]byte, error) {
	field, err := b.text(b.cols.excluded)
	if err != nil {
		return nil, err
	}
	if _, flag := yes(field); flag && len(field) > 0 {
		return nil, &Error{Line: b.scan.recordLine, Column: b.cols.label(b.cols.excluded), Value: clip(field), Problem: "is no reason for an exclusion",
			Advice: "write why the result is left out, or leave the field empty"}
	}
	return field, nil
}
