package store

import (
	"context"
	"crypto/subtle"
	"encoding/json"
	"errors"
	"fmt"
	"time"

	"github.com/jackc/pgx/v5"

	"limitary/internal/definition"
)

const keyColumns = `k.key_id, k.principal, k.roles, k.labels, k.sources, k.created_at, k.expires_at, r.revoked_at`

const keyTables = `keys k LEFT JOIN key_revocations r USING (key_id)`

// keyTargets are where a row of keyColumns is scanned to; done finishes the key.
func keyTargets(k *definition.Key) (targets []any, done func()) {
	var revoked nullableTime
	return []any{&k.ID, &k.Principal, &k.Roles, &k.Labels, &k.Sources, &k.CreatedAt, &k.ExpiresAt, &revoked}, func() {
		k.CreatedAt, k.ExpiresAt, k.RevokedAt = k.CreatedAt.UTC(), k.ExpiresAt.UTC(), revoked.time()
	}
}

func scanKey(row pgx.CollectableRow) (k definition.Key, err error) {
	targets, done := keyTargets(&k)
	err = row.Scan(targets...)
	done()
	return k, err
}

// keyByID reads a key that the actor may see: one limited at least as much as the actor's own.
func keyByID(ctx context.Context, q querier, a Actor, id string) (definition.Key, error) {
	rows, err := q.Query(ctx, `SELECT `+keyColumns+` FROM `+keyTables+` WHERE k.key_id = $1 AND k.labels @> $2`, id, a.scope())
	if err != nil {
		return definition.Key{}, err
	}
	k, err := pgx.CollectExactlyOneRow(rows, scanKey)
	if errors.Is(err, pgx.ErrNoRows) {
		err = &definition.Error{Reason: definition.NotFound, Field: "id", Text: fmt.Sprintf("there is no key %q", id)}
	}
	return k, err
}

// keyAnswer is what the repeat of a request about a key finds again. It never holds the secret.
type keyAnswer struct {
	Key string `json:"key"`
}

func replayKey(a Actor, into *definition.Key) func(context.Context, pgx.Tx, []byte) error {
	return func(ctx context.Context, tx pgx.Tx, answer []byte) error {
		var earlier keyAnswer
		err := json.Unmarshal(answer, &earlier)
		if err == nil {
			*into, err = keyByID(ctx, tx, a, earlier.Key)
		}
		return err
	}
}

// CreateKey stores a key, and its principal if it is new. The caller chooses the id and keeps the secret; only its hash
// comes here. Fresh is false where the request is a repeat: the key given is then the earlier one, and the caller's
// secret is not its.
func (s *Store) CreateKey(ctx context.Context, a Actor, req Request, k definition.Key, secretHash []byte) (made definition.Key, fresh bool, err error) {
	defer wrap(ctx, &err, "CreateKey")
	for name, value := range a.Key.Labels {
		if got, ok := k.Labels[name]; !ok || got != value {
			return made, false, definition.Invalid("labels", "want at least %v, to which the key in use is limited", a.Key.Labels)
		}
	}
	if k.Labels == nil {
		k.Labels = map[string]string{}
	}
	if k.Sources == nil {
		k.Sources = []string{}
	}
	k.ExpiresAt = k.ExpiresAt.UTC().Truncate(time.Microsecond)
	err = s.change(ctx, a, req, func(ctx context.Context, w *work) (any, error) {
		entry, err := w.entry(ctx, keysChain)
		if err != nil {
			return nil, err
		}
		if err := k.Check(w.now); err != nil {
			return nil, err
		}
		made, fresh = k, true
		made.CreatedAt, made.RevokedAt = w.now, time.Time{}
		return keyAnswer{k.ID}, w.insertKey(ctx, made, secretHash, entry)
	}, func(ctx context.Context, tx pgx.Tx, answer []byte) error {
		fresh = false
		return replayKey(a, &made)(ctx, tx, answer)
	})
	return made, fresh && err == nil, err
}

func (w *work) insertKey(ctx context.Context, k definition.Key, secretHash []byte, entry int64) error {
	_, err := w.tx.Exec(ctx, `INSERT INTO principals (name, created_at) VALUES ($1, $2) ON CONFLICT ON CONSTRAINT principals_name_key DO NOTHING`,
		k.Principal, w.now)
	if err != nil {
		return err
	}
	_, err = w.tx.Exec(ctx, `INSERT INTO keys (key_id, principal, secret_hash, roles, labels, sources, created_by, created_at, expires_at, entry)
		VALUES ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10)`,
		k.ID, k.Principal, secretHash, k.Roles, k.Labels, k.Sources, w.actor.Principal, w.now, k.ExpiresAt, entry)
	if err != nil {
		return err
	}
	return w.seal(ctx, keysChain, entry, "CREATE_KEY", struct {
		Key       string                  `json:"key"`
		Principal string                  `json:"principal"`
		Roles     []definition.Permission `json:"roles"`
		Labels    map[string]string       `json:"labels"`
		Sources   []string                `json:"sources"`
		ExpiresAt time.Time               `json:"expires_at"`
	}{k.ID, k.Principal, k.Roles, k.Labels, k.Sources, k.ExpiresAt})
}

// ListKeys gives the keys limited at least as much as the actor's own, by principal and id.
func (s *Store) ListKeys(ctx context.Context, a Actor, p Page, includeRevoked bool) (list []definition.Key, next string, err error) {
	defer wrap(ctx, &err, "ListKeys")
	filter := []any{"keys", a.scope(), includeRevoked}
	var after [2]string
	size, _, err := p.open(filter, &after)
	if err != nil {
		return nil, "", err
	}
	err = s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		rows, err := tx.Query(ctx, `SELECT `+keyColumns+` FROM `+keyTables+`
			WHERE (k.principal, k.key_id) > ($1, $2) AND k.labels @> $3 AND (r.revoked_at IS NULL OR $4)
			ORDER BY k.principal, k.key_id LIMIT $5`, after[0], after[1], a.scope(), includeRevoked, size+1)
		if err != nil {
			return err
		}
		list, err = pgx.CollectRows(rows, scanKey)
		return err
	})
	if err != nil {
		return nil, "", err
	}
	return cut(list, size, filter, func(k definition.Key) any { return [2]string{k.Principal, k.ID} })
}

// RevokeKey ends a key at once and for good.
func (s *Store) RevokeKey(ctx context.Context, a Actor, req Request, id string) (made definition.Key, err error) {
	defer wrap(ctx, &err, "RevokeKey")
	err = s.change(ctx, a, req, func(ctx context.Context, w *work) (any, error) {
		entry, err := w.entry(ctx, keysChain)
		if err != nil {
			return nil, err
		}
		if made, err = keyByID(ctx, w.tx, a, id); err != nil {
			return nil, err
		}
		if !made.RevokedAt.IsZero() {
			return nil, &definition.Error{Reason: definition.NothingToDo, Field: "id", Text: fmt.Sprintf("key %q is revoked already", id)}
		}
		_, err = w.tx.Exec(ctx, `INSERT INTO key_revocations (key_id, revoked_by, revoked_at, entry) VALUES ($1, $2, $3, $4)`,
			id, a.Principal, w.now, entry)
		if err != nil {
			return nil, err
		}
		made.RevokedAt = w.now
		return keyAnswer{id}, w.seal(ctx, keysChain, entry, "REVOKE_KEY", keyAnswer{id})
	}, replayKey(a, &made))
	return made, err
}

// KeyBySecret gives the key of an id whose secret has the hash, if it is neither expired by the database's clock nor
// revoked. Unless the secret is right, the refusal is the same whatever is wrong.
func (s *Store) KeyBySecret(ctx context.Context, id string, secretHash []byte) (k definition.Key, err error) {
	defer wrap(ctx, &err, "KeyBySecret")
	var hash []byte
	var expired bool
	err = retry(ctx, func() error {
		targets, done := keyTargets(&k)
		err := s.pool.QueryRow(ctx, `SELECT `+keyColumns+`, k.secret_hash, k.expires_at <= clock_timestamp() FROM `+keyTables+`
			WHERE k.key_id = $1`, id).Scan(append(targets, &hash, &expired)...)
		done()
		return s.noted(ctx, "KeyBySecret", err)
	})
	unknown := errors.Is(err, pgx.ErrNoRows)
	if err != nil && !unknown {
		return definition.Key{}, err
	}
	switch {
	case unknown, subtle.ConstantTimeCompare(hash, secretHash) != 1:
		return definition.Key{}, definition.Refuse(definition.Unauthenticated, "the key is not valid")
	case !k.RevokedAt.IsZero():
		return definition.Key{}, definition.Refuse(definition.Unauthenticated, "the key was revoked")
	case expired:
		return definition.Key{}, definition.Refuse(definition.Unauthenticated, "the key expired on %s", k.ExpiresAt.Format(time.RFC3339))
	}
	return k, nil
}
