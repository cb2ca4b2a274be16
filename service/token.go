package service

import (
	"crypto/sha256"
	"encoding/base32"
	"io"
	"regexp"
)

const (
	tokenIDBytes     = 10
	tokenSecretBytes = 32
)

// tokenText is the alphabet of tokens: lower case, so that nobody has to ask.
var tokenText = base32.NewEncoding("abcdefghijklmnopqrstuvwxyz234567").WithPadding(base32.NoPadding)

var tokenForm = regexp.MustCompile(`^lim_([a-z2-7]{16})_([a-z2-7]{52})$`)

// NewToken makes a bearer token, "lim_<id>_<secret>": its id is public and names the key, of its secret only the hash is
// kept.
func NewToken(random io.Reader) (id, token string, secretHash []byte, err error) {
	b := make([]byte, tokenIDBytes+tokenSecretBytes)
	if _, err := io.ReadFull(random, b); err != nil {
		return "", "", nil, err
	}
	id = tokenText.EncodeToString(b[:tokenIDBytes])
	secret := tokenText.EncodeToString(b[tokenIDBytes:])
	return id, "lim_" + id + "_" + secret, hashSecret(secret), nil
}

// ParseToken takes a bearer token apart; ok is false where it has not the form of one.
func ParseToken(token string) (id string, secretHash []byte, ok bool) {
	m := tokenForm.FindStringSubmatch(token)
	if m == nil {
		return "", nil, false
	}
	return m[1], hashSecret(m[2]), true
}

// hashSecret needs no salt and no slowness: the secret is 256 random bits.
func hashSecret(secret string) []byte {
	sum := sha256.Sum256([]byte(secret))
	return sum[:]
}
