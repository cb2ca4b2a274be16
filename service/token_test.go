package service_test

import (
	"bytes"
	"crypto/rand"
	"crypto/sha256"
	"regexp"
	"strings"
	"testing"

	"limitary/service"
)

func TestATokenComesApartAgain(t *testing.T) {
	id, token, hash, err := service.NewToken(rand.Reader)
	if err != nil {
		t.Fatal(err)
	}
	if !regexp.MustCompile(`^lim_[a-z2-7]{16}_[a-z2-7]{52}$`).MatchString(token) {
		t.Errorf("got token of the form %q", regexp.MustCompile(`[a-z2-7]`).ReplaceAllString(token, "x"))
	}
	secret := token[strings.LastIndex(token, "_")+1:]
	want := sha256.Sum256([]byte(secret))
	gotID, gotHash, ok := service.ParseToken(token)
	if !ok || gotID != id || !bytes.Equal(gotHash, hash) || !bytes.Equal(hash, want[:]) {
		t.Errorf("got id %q ok %t, want %q", gotID, ok, id)
	}
	other, _, _, err := service.NewToken(rand.Reader)
	if err != nil || other == id {
		t.Errorf("two tokens have the id %q (%v)", id, err)
	}
}

func TestWhatIsNoToken(t *testing.T) {
	_, token, _, err := service.NewToken(rand.Reader)
	if err != nil {
		t.Fatal(err)
	}
	for _, text := range []string{"", "lim__", token + "a", token[1:], strings.ToUpper(token), token[:len(token)-1], " " + token, token + "\n"} {
		if _, _, ok := service.ParseToken(text); ok {
			t.Errorf("%q is taken for a token", text)
		}
	}
}

func TestNoRandomnessNoToken(t *testing.T) {
	if _, _, _, err := service.NewToken(strings.NewReader("too short")); err == nil {
		t.Error("got a token from nine bytes")
	}
}
