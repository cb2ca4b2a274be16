package resultfile

import (
	"bytes"
	"fmt"

	"limitary/internal/chart"
)

// longRow takes in one reading of the long form.
func (b *builder) longRow() error {
	name, err := b.text(b.cols.subgroup)
	if err != nil {
		return err
	}
	if len(name) == 0 {
		if b.allEmpty() {
			b.table.Skipped++
			return nil
		}
		return &Error{Line: b.scan.recordLine, Column: b.cols.label(b.cols.subgroup), Problem: "is empty, so the row belongs to no subgroup",
			Advice: "name the subgroup in every row"}
	}
	if b.groupLine == 0 || !bytes.Equal(name, b.table.group.at(b.table.rows)) {
		err = b.beginGroup(name)
	} else {
		err = b.continueGroup(name)
	}
	if err != nil {
		return err
	}
	size := len(b.table.values)
	if err := b.reading(b.cols.values[0]); err != nil {
		return err
	}
	b.groupSize += len(b.table.values) - size
	if b.groupSize > chart.SubgroupSizeMax {
		return &Error{Line: b.scan.recordLine, Column: b.cols.label(b.cols.subgroup), Value: clip(name),
			Problem: fmt.Sprintf("the subgroup has more than %d readings, the limit", chart.SubgroupSizeMax),
			Advice:  "choose a column that tells the subgroups apart"}
	}
	return nil
}

func (b *builder) allEmpty() bool {
	for _, f := range b.scan.fields {
		if len(bytes.TrimSpace(f)) > 0 {
			return false
		}
	}
	return true
}

func (b *builder) beginGroup(name []byte) error {
	if b.groupLine > 0 {
		b.table.endRow(b.groupLine)
	}
	if before, again := b.groupsSeen[string(name)]; again {
		return &Error{Line: b.scan.recordLine, Column: b.cols.label(b.cols.subgroup), Value: clip(name),
			Problem: fmt.Sprintf("the subgroup that began in line %d comes back after another one", before),
			Advice:  "put its rows together, or give different subgroups different names"}
	}
	if b.groupsSeen == nil {
		b.groupsSeen = make(map[string]int)
	}
	b.groupsSeen[string(name)] = b.scan.recordLine
	b.groupLine, b.groupSize = b.scan.recordLine, 0
	return b.texts()
}

// continueGroup holds a further row of the subgroup against its first.
func (b *builder) continueGroup(name []byte) error {
	row := b.table.rows
	if b.cols.excluded >= 0 {
		reason, err := b.reason()
		if err != nil {
			return err
		}
		if first := b.table.exclude.at(row); !bytes.Equal(first, reason) {
			return &Error{Line: b.scan.recordLine, Column: b.cols.label(b.cols.excluded), Value: clip(reason),
				Problem: fmt.Sprintf("subgroup %q has %q in line %d, and only a whole subgroup can be excluded", clip(name), clip(first), b.groupLine),
				Advice:  "write the same reason in all its rows, or in none; leave the reading empty to leave out one reading"}
		}
	}
	if b.cols.material >= 0 {
		material, err := b.text(b.cols.material)
		if err != nil {
			return err
		}
		if first := b.table.material.at(row); !bytes.Equal(first, material) {
			return &Error{Line: b.scan.recordLine, Column: b.cols.label(b.cols.material), Value: clip(material),
				Problem: fmt.Sprintf("subgroup %q is of %q in line %d, and a subgroup is of one material", clip(name), clip(first), b.groupLine),
				Advice:  "write the same material in all its rows, or give the subgroups different names"}
		}
	}
	if b.cols.mark >= 0 {
		mark, err := b.breakHere()
		if err != nil {
			return err
		}
		if mark && !b.table.Break(row) {
			return &Error{Line: b.scan.recordLine, Column: b.cols.label(b.cols.mark), Problem: fmt.Sprintf("a segment cannot begin inside subgroup %q", clip(name)),
				Advice: "mark the first row of the subgroup"}
		}
	}
	return nil
}
