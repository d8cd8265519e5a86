package cli

import (
	"context"
	"errors"

	"drumlin/bandwidth"
	"drumlin/cmd/drumlin/internal/config"
	"drumlin/cmd/drumlin/internal/pipeline"
	"drumlin/io/bundle"
	"drumlin/io/events"
	"drumlin/io/geotiff"
	"drumlin/mv"
	"drumlin/spatial"
)

// Exit status, as every help text lists them. 2 is left to the Go runtime.
const (
	exitDone        = 0
	exitFault       = 1
	exitSettings    = 4
	exitInput       = 5
	exitUnsupported = 6
	exitNothing     = 7
	exitOutput      = 8
	exitInterrupted = 130
)

// errUsage marks a command line that cannot be read.
var errUsage = errors.New("bad command line")

// exitStatus returns the status that an error ends with.
func exitStatus(err error) int {
	for _, k := range []struct {
		kind   error
		status int
	}{
		{context.Canceled, exitInterrupted},
		{bundle.ErrExists, exitOutput}, {bundle.ErrLocked, exitOutput}, {bundle.ErrOutput, exitOutput},
		{config.ErrSettings, exitSettings}, {errUsage, exitSettings}, {events.ErrSetting, exitSettings}, {spatial.ErrCRSUnknown, exitSettings},
		{events.ErrMissing, exitInput}, {events.ErrMalformed, exitInput},
		{events.ErrUnsupported, exitUnsupported}, {spatial.ErrCRSUnsupported, exitUnsupported}, {spatial.ErrUnsupportedGeometry, exitUnsupported},
		{geotiff.ErrTooLarge, exitUnsupported}, {geotiff.ErrUnsupported, exitUnsupported}, {mv.ErrTooLarge, exitUnsupported},
		{spatial.ErrWithheld, exitNothing}, {mv.ErrDegenerate, exitNothing}, {pipeline.ErrNoEvents, exitNothing}, {bandwidth.ErrNoMinimum, exitNothing},
	} {
		if errors.Is(err, k.kind) {
			return k.status
		}
	}
	return exitFault
}

func version() string { return pipeline.Version }
