package track_test

import (
	"strings"
	"testing"
)

// FuzzSchedule draws schedules from the input: state and ids are as the plain route and the rule of identity have them.
func FuzzSchedule(f *testing.F) {
	f.Add([]byte{})
	f.Add([]byte("the state of a track depends on what was posted, not how it was"))
	for _, stride := range []byte{7, 31, 101, 151, 211} {
		seed := make([]byte, 400)
		for i := range seed {
			seed[i] = byte(i)*stride ^ byte(i>>3)
		}
		f.Add(seed)
	}
	f.Fuzz(func(t *testing.T, input []byte) {
		s := drawSchedule(fromBytes(input), 25)
		if problems := s.run(); len(problems) > 0 {
			t.Fatalf("%s%s", s, strings.Join(problems, "\n"))
		}
	})
}

// fromBytes draws numbers from the bytes of an input, and zeros after its end.
func fromBytes(input []byte) dice {
	return func(n int) int {
		if len(input) == 0 {
			return 0
		}
		v := int(input[0])
		input = input[1:]
		return v % n
	}
}
