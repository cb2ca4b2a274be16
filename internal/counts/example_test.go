package counts_test

import (
	"fmt"

	"limitary/internal/counts"
)

// With 4 colonies on a plate on average, 11 are still on the upper action line, and no count is too low.
func ExampleUpper() {
	law, err := counts.Poisson(4)
	if err != nil {
		fmt.Println(err)
		return
	}
	u, realised, ok := counts.Upper(law, 0.00135)
	fmt.Printf("upper %g, realised %.6f, %t\n", u, realised, ok)
	_, _, ok = counts.Lower(law, 0.00135)
	fmt.Println("lower:", ok)
	// Output:
	// upper 11, realised 0.000915, true
	// lower: false
}
