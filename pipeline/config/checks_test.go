package config

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

func TestChecks(t *testing.T) {
	doc, err := Parse("c.yaml", []byte("x: 0\ny:\n  - {w: 1}\n  - {w: 1}\n"))
	require.NoError(t, err)
	nan, inf := math.NaN(), math.Inf(1)
	for _, c := range []struct {
		check func(*Checks)
		want  string
	}{
		{func(c *Checks) { c.Positive("x", 0) }, "c.yaml:1: x: 0 is not above 0; give a positive number"},
		{func(c *Checks) { c.Positive("x", nan) }, "c.yaml:1: x: NaN is not above 0; give a positive number"},
		{func(c *Checks) { c.Positive("x", inf) }, "c.yaml:1: x: +Inf is not above 0; give a positive number"},
		{func(c *Checks) { c.Positive("x", 1e-300) }, ""},
		{func(c *Checks) { c.NotNegative("x", -0.5) }, "c.yaml:1: x: -0.5 is below 0; give a number not below 0"},
		{func(c *Checks) { c.NotNegative("x", 0) }, ""},
		{func(c *Checks) { c.NotNegative("x", nan) }, "c.yaml:1: x: NaN is below 0; give a number not below 0"},
		{func(c *Checks) { c.Finite("x", nan) }, "c.yaml:1: x: NaN is no finite number; give one"},
		{func(c *Checks) { c.Finite("x", -inf) }, "c.yaml:1: x: -Inf is no finite number; give one"},
		{func(c *Checks) { c.Finite("x", -1) }, ""},
		{func(c *Checks) { c.Within("x", 91, -90, 90) }, "c.yaml:1: x: 91 is outside -90 to 90; give a number in this range"},
		{func(c *Checks) { c.Within("x", nan, -90, 90) }, "c.yaml:1: x: NaN is outside -90 to 90; give a number in this range"},
		{func(c *Checks) { c.Within("x", -90, -90, 90); c.Within("x", 90, -90, 90) }, ""},
		{func(c *Checks) { c.Count("x", 0, 1, 5) }, "c.yaml:1: x: 0 is outside 1 to 5; give a whole number in this range"},
		{func(c *Checks) { c.Count("x", 5, 1, 5); c.Count("x", 1, 1, 5) }, ""},
		{func(c *Checks) { c.OneOf("x", "c", "a", "b") }, `c.yaml:1: x: "c" is unknown; write a or b`},
		{func(c *Checks) { c.OneOf("x", "c", "a") }, `c.yaml:1: x: "c" is unknown; write a`},
		{func(c *Checks) { c.OneOf("x", "b", "a", "b") }, ""},
		{func(c *Checks) { c.Ascending("y", "w", []float64{1, 1}, 1) }, "c.yaml:4: y[1].w: 1 does not lie above 1 before it; list the rows in ascending order"},
		{func(c *Checks) { c.Ascending("y", "w", []float64{1}, 2) }, "c.yaml:2: y: the table has 1 rows; give at least 2"},
		{func(c *Checks) { c.Ascending("y", "w", []float64{1, nan}, 2) }, "c.yaml:4: y[1].w: NaN does not lie above 1 before it; list the rows in ascending order"},
		{func(c *Checks) { c.Ascending("y", "w", []float64{1, 2}, 2) }, ""},
		{func(c *Checks) { c.That(false, "x", "first; cure"); c.Positive("x", 0) }, "c.yaml:1: x: first; cure"},
	} {
		checks := doc.Checks()
		c.check(checks)
		if c.want == "" {
			require.NoError(t, checks.Err())
			continue
		}
		require.EqualError(t, checks.Err(), c.want)
	}
	var none *Doc
	checks := none.Checks()
	checks.Positive("a.b", 0)
	require.EqualError(t, checks.Err(), "a.b: 0 is not above 0; give a positive number")
}
