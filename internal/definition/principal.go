package definition

import (
	"fmt"
	"slices"
	"time"
)

// Permission is a role a key can have. Every key can read what its labels allow.
type Permission string

const (
	Reader   Permission = "reader"
	Poster   Permission = "poster"
	Author   Permission = "author"
	Approver Permission = "approver"
	Reviewer Permission = "reviewer"
	Admin    Permission = "admin"
)

// Permissions lists the roles in the order they are shown.
var Permissions = []Permission{Reader, Poster, Author, Approver, Reviewer, Admin}

// ParsePermission reads a role's name.
func ParsePermission(name string) (Permission, error) {
	if p := Permission(name); slices.Contains(Permissions, p) {
		return p, nil
	}
	return "", Invalid("roles", "%q: want reader, poster, author, approver, reviewer or admin", clip(name))
}

const (
	// KeyLifeDefault and KeyLifeMax bound how long a key lives: a forgotten one ends by itself.
	KeyLifeDefault = 365 * 24 * time.Hour
	KeyLifeMax     = 5 * 366 * 24 * time.Hour
	// SourcesMax bounds the sources a key may post as.
	SourcesMax = 100
)

// Key is a credential of a principal. The secret is not part of it.
type Key struct {
	// ID is the public part of the token.
	ID        string
	Principal string
	Roles     []Permission
	// Labels limit the key to charts that have all of them.
	Labels map[string]string
	// Sources the key may post as; none means any.
	Sources   []string
	CreatedAt time.Time
	ExpiresAt time.Time
	RevokedAt time.Time
}

// Check reports the first thing wrong with a key about to be made.
func (k Key) Check(now time.Time) error {
	if err := CheckName("principal", k.Principal, 1, NameBytesMax); err != nil {
		return err
	}
	if len(k.Roles) == 0 {
		return Invalid("roles", "is empty; want at least one role")
	}
	for _, r := range k.Roles {
		if _, err := ParsePermission(string(r)); err != nil {
			return err
		}
	}
	if len(k.Sources) > SourcesMax {
		return &Error{Reason: TooManyItems, Field: "sources", Text: fmt.Sprintf("%d sources, the limit is %d", len(k.Sources), SourcesMax)}
	}
	for i, s := range k.Sources {
		if err := CheckName(fmt.Sprintf("sources[%d]", i), s, 1, NameBytesMax); err != nil {
			return err
		}
	}
	if !k.ExpiresAt.After(now) || k.ExpiresAt.After(now.Add(KeyLifeMax)) {
		return Invalid("expire_time", "%s: want a time within the next five years", k.ExpiresAt.Format(time.RFC3339))
	}
	return CheckLabels("labels", k.Labels)
}

// Has reports whether the key has a role.
func (k Key) Has(p Permission) bool { return slices.Contains(k.Roles, p) }

// Sees reports whether the key's labels allow a chart with the given labels.
func (k Key) Sees(labels map[string]string) bool {
	for name, want := range k.Labels {
		if got, ok := labels[name]; !ok || got != want {
			return false
		}
	}
	return true
}
