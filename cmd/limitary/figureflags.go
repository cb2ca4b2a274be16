package main

import (
	"fmt"
	"strings"

	"limitary/internal/chart"
	"limitary/internal/report"
)

// levelFlag collects the levels of a standardised track.
type levelFlag []chart.Level

func (l *levelFlag) String() string {
	texts := make([]string, len(*l))
	for i, level := range *l {
		texts[i] = fmt.Sprintf("%s=%s,%s", level.Material, report.Shortest(level.Reference), report.Shortest(level.Sigma))
	}
	return strings.Join(texts, " ")
}

// Set reads MATERIAL=REFERENCE,SIGMA; a material may hold an equals sign.
func (l *levelFlag) Set(s string) error {
	wrong := fmt.Errorf("want MATERIAL=REFERENCE,SIGMA, such as low=2.5,0.08")
	at := strings.LastIndex(s, "=")
	if at < 1 {
		return wrong
	}
	reference, sigma, ok := strings.Cut(s[at+1:], ",")
	if !ok || strings.Contains(sigma, ",") {
		return wrong
	}
	level := chart.Level{Material: strings.TrimSpace(s[:at])}
	var err error
	if level.Reference, err = parseNumber(reference); err != nil {
		return fmt.Errorf("the reference %q: %w", reference, err)
	}
	if level.Sigma, err = parseNumber(sigma); err != nil {
		return fmt.Errorf("the sigma %q: %w", sigma, err)
	}
	*l = append(*l, level)
	return nil
}

// numbersFlag is a list of numbers separated by commas.
type numbersFlag []float64

func (n *numbersFlag) String() string {
	texts := make([]string, len(*n))
	for i, x := range *n {
		texts[i] = report.Shortest(x)
	}
	return strings.Join(texts, ",")
}

func (n *numbersFlag) Set(s string) error {
	for _, text := range strings.Split(s, ",") {
		x, err := parseNumber(text)
		if err != nil {
			return fmt.Errorf("%q: want numbers with a decimal point, separated by commas", text)
		}
		*n = append(*n, x)
	}
	return nil
}
