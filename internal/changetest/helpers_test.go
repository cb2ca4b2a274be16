package changetest_test

import (
	"testing"

	"limitary/internal/changetest"
	"limitary/internal/chart"
	"limitary/internal/limits"
)

func mustCompare(t testing.TB, req changetest.Request) changetest.Result {
	t.Helper()
	res, err := changetest.Compare(req)
	if err != nil {
		t.Fatal(err)
	}
	return res
}

// standard limits in force: individuals around 10 with sigma 1, from 40 results by moving ranges.
func standard() changetest.InForce {
	return changetest.InForce{Kind: chart.Individuals, SubgroupSize: 1, Centre: 10, Sigma: 1, Groups: 40, Readings: 40, Estimator: limits.MeanMovingRange, DegreesOfFreedom: 24.2}
}

func ptr[T any](x T) *T { return &x }
