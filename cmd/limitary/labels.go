package main

import (
	"fmt"
	"strings"
)

// labelMap is a flag of key=value that may be given several times.
type labelMap map[string]string

func (m *labelMap) String() string {
	var out []string
	for k, v := range *m {
		out = append(out, k+"="+v)
	}
	return strings.Join(out, ",")
}

// Set implements flag.Value.
func (m *labelMap) Set(s string) error {
	k, v, ok := strings.Cut(s, "=")
	if !ok || k == "" {
		return fmt.Errorf("%q: want KEY=VALUE", s)
	}
	if _, twice := (*m)[k]; twice {
		return fmt.Errorf("%q is given twice", k)
	}
	if *m == nil {
		*m = labelMap{}
	}
	(*m)[k] = v
	return nil
}
