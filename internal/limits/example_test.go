package limits_test

import (
	"fmt"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

// Ten flow rates: NIST/SEMATECH e-Handbook of Statistical Methods, 6.3.2.2. The handbook prints 45.8159 and 55.8041,
// having divided by 1.128 in place of 2/√π.
func ExampleCompute() {
	req := limits.Request{Kind: chart.Individuals, SubgroupSize: 1}
	for _, x := range []float64{49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6, 52.4, 53.6, 52.1} {
		req.Groups = append(req.Groups, limits.Group{Readings: []float64{x}, Decimals: 1})
	}
	res, err := limits.Compute(req)
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Println("sigma", res.ProcessSigma)
	fmt.Println("limits", res.Location.LowerAction.Value, *res.Location.Centre, res.Location.UpperAction.Value)
	for _, e := range res.Estimates {
		fmt.Printf("%s %.4f, %.1f degrees of freedom\n", e.Name, e.Sigma, e.DegreesOfFreedom)
	}
	for _, f := range res.Findings {
		fmt.Println(f.Code, f.Text)
	}
	// Output:
	// sigma 1.664
	// limits 45.818 50.81 55.802
	// MEAN_MOVING_RANGE_OVER_D2 1.6641, 5.9 degrees of freedom
	// MEDIAN_MOVING_RANGE 1.5725, 3.0 degrees of freedom
	// OVERALL 2.0910, 9.0 degrees of freedom
	// PROVISIONAL The limits rest on 10 results; at least 25 are advised.
}

func ExampleFactors() {
	f, _ := limits.Factors(5)
	fmt.Printf("d2 %.3f, d3 %.3f, c4 %.4f, A2 %.3f, D4 %.3f", f.RangeMean, f.RangeSigma, f.SMean, f.A2, f.D4)
	// Output: d2 2.326, d3 0.864, c4 0.9400, A2 0.577, D4 2.114
}
