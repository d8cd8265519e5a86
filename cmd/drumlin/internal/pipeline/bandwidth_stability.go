package pipeline

import (
	"context"

	"drumlin/bandwidth"
)

// stability runs the smoothed bootstrap for the first selector of the table.
func (c *comparison) stability(ctx context.Context, t *Table, e bandwidth.Events) error {
	n := c.settings.Stability
	if n == 0 || t.Rows[0].Matrix == nil {
		return nil
	}
	c.run.report.Stage("stability")
	method := t.Rows[0].Asked
	b, err := bandwidth.Bootstrap(ctx, e, bandwidth.BootstrapOptions{
		Method: method, Options: bandwidth.Options{Shape: c.shape}, Replicates: n, Seed: uint64(c.settings.Seed), Workers: c.run.workers,
	})
	if err != nil {
		return err
	}
	iv := b.Intervals()
	t.Stability = &Stability{
		Selector: method, Replicates: len(b.Matrices), Seed: c.settings.Seed, Pilot: b.Pilot.Entries(),
		Major: iv.Major, Minor: iv.Minor, Bearing: iv.Bearing,
	}
	return nil
}
