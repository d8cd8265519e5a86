package pipeline

import (
	"context"
	"io"
	"testing"
	"time"

	"drumlin/cmd/drumlin/internal/config"
	"drumlin/cmd/drumlin/internal/progress"
)

func TestZZ(t *testing.T) {
	s := &config.BandwidthSettings{}
	s.Inputs = []string{"/tmp/ev.csv"}
	s.CRS, s.WorkCRS, s.Bandwidth, s.Shape, s.Zone = "plane", "auto", "lscv", "diagonal", "UTC"
	for range 3 {
		if _, err := Bandwidths(context.Background(), s, progress.New(io.Discard, progress.Silent), time.Now); err != nil {
			t.Fatal(err)
		}
	}
}
