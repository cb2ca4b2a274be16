package store

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/json"
	"errors"
	"fmt"
	"time"

	"github.com/jackc/pgx/v5"
)

// keysChain is the audit chain of keys and settings; every other chain is that of the chart of the same id.
const keysChain = 0

// auditPayload is what an audit entry says. The hash of the entry covers it and the hash before it, so it binds who did
// what, when and where in which chain. Its names never change.
type auditPayload struct {
	Chain     int64     `json:"chain"`
	Entry     int64     `json:"entry"`
	Kind      string    `json:"kind"`
	Principal string    `json:"principal"`
	At        time.Time `json:"at"`
	What      any       `json:"what"`
}

// chainHead is the newest entry of an audit chain.
type chainHead struct {
	entry int64
	hash  []byte
}

// auditHash chains a payload to the hash of the entry before it.
func auditHash(previous, payload []byte) []byte {
	h := sha256.New()
	h.Write(previous)
	h.Write(payload)
	return h.Sum(nil)
}

// entry reserves the next number of a chain by locking its head: always after track locks, and chains in the order of
// their ids. Every history row written in the transaction for that chart carries the number.
func (w *work) entry(ctx context.Context, chain int64) (int64, error) {
	head, locked := w.heads[chain]
	if !locked {
		err := w.tx.QueryRow(ctx, `SELECT entry, hash FROM chain_heads WHERE chain_id = $1 FOR UPDATE`, chain).Scan(&head.entry, &head.hash)
		if errors.Is(err, pgx.ErrNoRows) {
			return 0, fmt.Errorf("store: audit chain %d has no head", chain)
		}
		if err != nil {
			return 0, err
		}
		w.heads[chain] = head
	}
	return head.entry + 1, nil
}

// seal writes the audit row of a reserved entry and moves the chain's head to it. Payload holds the digests or ids of
// what was written, or all of it.
func (w *work) seal(ctx context.Context, chain, entry int64, kind string, payload any) error {
	head, locked := w.heads[chain]
	if !locked || entry != head.entry+1 {
		return fmt.Errorf("store: entry %d of chain %d was not reserved", entry, chain)
	}
	text, err := json.Marshal(auditPayload{chain, entry, kind, w.actor.Principal, w.now, payload})
	if err != nil {
		return err
	}
	previous := head.hash
	if previous == nil {
		previous = []byte{}
	}
	hash := auditHash(previous, text)
	var b pgx.Batch
	b.Queue(`INSERT INTO audit (chain_id, entry, kind, principal, payload, previous, hash, recorded_at) VALUES ($1, $2, $3, $4, $5, $6, $7, $8)`,
		chain, entry, kind, w.actor.Principal, text, previous, hash, w.now)
	b.Queue(`UPDATE chain_heads SET entry = $2, hash = $3 WHERE chain_id = $1`, chain, entry, hash)
	if err := w.tx.SendBatch(ctx, &b).Close(); err != nil {
		return err
	}
	w.heads[chain] = chainHead{entry, bytes.Clone(hash)}
	return nil
}
