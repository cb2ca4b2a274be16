package server_test

import (
	"context"
	"testing"

	"limitary/internal/pgtest"
	"limitary/internal/store"
)

func TestMain(m *testing.M) {
	pgtest.Main(m, func(ctx context.Context, ownerURL string) error {
		_, err := store.Migrate(ctx, ownerURL)
		return err
	})
}
