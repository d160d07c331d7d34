package job

import (
	"context"
	"errors"
	"time"

	"gatesill/acquire"
	"gatesill/acquire/bench"
)

func listen(ctx context.Context, b *bench.Bench, start time.Time, emit func(acquire.Event)) error {
	return errors.New("not yet")
}
