package store_test

import (
	"testing"
	"time"

	"limitary/internal/definition"
	"limitary/internal/store"
)

func TestKeyIsFoundByItsSecretUntilItEnds(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	asked := key("dan", map[string]string{"site": "ostley"})
	asked.Sources = []string{"bench 3"}
	asked.Roles = []definition.Permission{definition.Poster, definition.Reader}
	made, fresh, err := f.CreateKey(t.Context(), f.admin, req(), asked, keyHash("secret"))
	if err != nil || !fresh {
		t.Fatalf("fresh %v, %v", fresh, err)
	}
	got, err := f.KeyBySecret(t.Context(), asked.ID, keyHash("secret"))
	if err != nil {
		t.Fatal(err)
	}
	want(t, "key read back", got, made)
	want(t, "roles", got.Roles, "[poster reader]")

	t.Run("not with another secret or id", func(t *testing.T) {
		_, wrong := f.KeyBySecret(t.Context(), asked.ID, keyHash("guess"))
		_, unknown := f.KeyBySecret(t.Context(), "nosuchkey0000000", keyHash("secret"))
		wantReason(t, wrong, definition.Unauthenticated)
		wantReason(t, unknown, definition.Unauthenticated)
		if wrong.Error() != unknown.Error() {
			t.Errorf("the refusals tell a known id from an unknown one: %q, %q", wrong, unknown)
		}
	})
	t.Run("not once revoked", func(t *testing.T) {
		r := req()
		revoked, err := f.RevokeKey(t.Context(), f.admin, r, asked.ID)
		if err != nil || revoked.RevokedAt.IsZero() {
			t.Fatalf("revoked at %v, %v", revoked.RevokedAt, err)
		}
		_, err = f.KeyBySecret(t.Context(), asked.ID, keyHash("secret"))
		wantReason(t, err, definition.Unauthenticated)
		again, err := f.RevokeKey(t.Context(), f.admin, r, asked.ID)
		if err != nil {
			t.Errorf("repeat: %v", err)
		}
		want(t, "repeat", again, revoked)
		_, err = f.RevokeKey(t.Context(), f.admin, req(), asked.ID)
		wantReason(t, err, definition.NothingToDo)
		_, err = f.RevokeKey(t.Context(), f.admin, req(), "nosuchkey0000000")
		wantReason(t, err, definition.NotFound)
	})
	t.Run("listed only on request then", func(t *testing.T) {
		for includeRevoked, count := range map[bool]int{false: 3, true: 4} { // ann, bob, cleo, dan
			list, _, err := f.ListKeys(t.Context(), f.admin, store.Page{}, includeRevoked)
			if err != nil {
				t.Fatal(err)
			}
			want(t, "keys", len(list), count)
		}
	})
}

func TestExpiredKeyIsRefusedByTheDatabasesClock(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	k := key("dan", nil)
	for _, expiry := range []time.Time{time.Now().Add(-time.Second), time.Now().Add(definition.KeyLifeMax + time.Hour)} {
		k.ExpiresAt = expiry
		_, _, err := f.CreateKey(t.Context(), f.admin, req(), k, keyHash("secret"))
		wantReason(t, err, definition.InvalidField)
	}
	// A key that expired while nobody looked: written as it would have been a year ago.
	mustExec(t, f.owner(), `INSERT INTO keys (key_id, principal, secret_hash, roles, created_by, created_at, expires_at, entry)
		VALUES ($1, 'ann', $2, '{reader}', 'operator', now() - interval '1 year', now() - interval '1 second', 1)`, k.ID, keyHash("secret"))
	_, err := f.KeyBySecret(t.Context(), k.ID, keyHash("secret"))
	wantReason(t, err, definition.Unauthenticated)
}

func TestRepeatedKeyIsNotFresh(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	r, k := req(), key("dan", nil)
	first, fresh, err := f.CreateKey(t.Context(), f.admin, r, k, keyHash("first"))
	if err != nil || !fresh {
		t.Fatalf("fresh %v, %v", fresh, err)
	}
	// The caller made another id and secret for its second try; neither is stored.
	again, fresh, err := f.CreateKey(t.Context(), f.admin, r, key("dan", nil), keyHash("second"))
	if err != nil || fresh {
		t.Errorf("fresh %v, %v, want an old key", fresh, err)
	}
	want(t, "repeat", again, first)
	_, err = f.KeyBySecret(t.Context(), first.ID, keyHash("second"))
	wantReason(t, err, definition.Unauthenticated)
}

// A key limited by labels makes, sees and ends only keys that are limited at least as much.
func TestLimitedKeyCannotHandOutMoreThanItHas(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	local := f.mustActor("local admin", map[string]string{"site": "ostley"})
	for _, labels := range []map[string]string{nil, {"site": "harwick"}, {"analyte": "lead"}} {
		_, _, err := f.CreateKey(t.Context(), local, req(), key("dan", labels), keyHash("secret"))
		wantReason(t, err, definition.InvalidField)
	}
	if _, _, err := f.CreateKey(t.Context(), local, req(), key("dan", map[string]string{"site": "ostley", "analyte": "lead"}), keyHash("secret")); err != nil {
		t.Errorf("narrower: %v", err)
	}
	list, _, err := f.ListKeys(t.Context(), local, store.Page{}, true)
	if err != nil {
		t.Fatal(err)
	}
	want(t, "keys in sight", len(list), 2)
	_, err = f.RevokeKey(t.Context(), local, req(), f.ann.Key.ID)
	wantReason(t, err, definition.NotFound)
}

func TestKeyOfTakenIDIsRefused(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	k := key("dan", nil)
	k.ID = f.ann.Key.ID
	_, _, err := f.CreateKey(t.Context(), f.admin, req(), k, keyHash("secret"))
	wantReason(t, err, definition.AlreadyExists)
}
