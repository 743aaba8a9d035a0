package gum

import (
	"context"
	"errors"
)

func propagate(ctx context.Context, m *Model, s Settings) (*Result, error) {
	return nil, errors.ErrUnsupported
}
