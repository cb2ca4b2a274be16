package store_test

import (
	"context"
	"testing"

	"limitary/internal/pgtest"
	"limitary/internal/store"
)

func TestMain(m *testing.M) {
	pgtest.Main(m, func(ctx context.Context, url string) error {
		_, err := store.Migrate(ctx, url)
		return err
	})
}
