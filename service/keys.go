package service

import (
	"context"
	"crypto/rand"
	"fmt"
	"strings"
	"time"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
	"limitary/internal/store"
)

// KeyService keeps keys and the principals they belong to.
type KeyService struct {
	pb.UnimplementedKeyServiceServer
	store *store.Store
	now   func() time.Time
}

// CreateKey makes a key. The token is in the first answer only; repeating the request gives the key without it.
func (s *KeyService) CreateKey(ctx context.Context, in *pb.CreateKeyRequest) (*pb.CreateKeyResponse, error) {
	who, req, err := writer(ctx, in.RequestId, in)
	if err != nil {
		return nil, err
	}
	k, err := keyFromProto(in, s.now())
	if err != nil {
		return nil, err
	}
	if !who.Key.Sees(k.Labels) {
		return nil, definition.Invalid("labels", "a key limited to labels makes only keys that have the same limits")
	}
	id, token, hash, err := NewToken(rand.Reader)
	if err != nil {
		return nil, err
	}
	k.ID = id
	k, fresh, err := s.store.CreateKey(ctx, who, req, k, hash)
	if err != nil {
		return nil, err
	}
	if !fresh {
		token = ""
	}
	return &pb.CreateKeyResponse{Key: KeyToProto(k), Token: token}, nil
}

// ListKeys gives the keys, without their secrets.
func (s *KeyService) ListKeys(ctx context.Context, in *pb.ListKeysRequest) (*pb.ListKeysResponse, error) {
	who, err := actor(ctx)
	if err != nil {
		return nil, err
	}
	p, err := readPage(in.PageSize, in.PageToken)
	if err != nil {
		return nil, err
	}
	keys, next, err := s.store.ListKeys(ctx, who, p, in.IncludeRevoked)
	if err != nil {
		return nil, err
	}
	out := &pb.ListKeysResponse{Keys: make([]*pb.Key, len(keys)), NextPageToken: next}
	for i, k := range keys {
		out.Keys[i] = KeyToProto(k)
	}
	return out, nil
}

// RevokeKey ends a key at once.
func (s *KeyService) RevokeKey(ctx context.Context, in *pb.RevokeKeyRequest) (*pb.RevokeKeyResponse, error) {
	who, req, err := writer(ctx, in.RequestId, in)
	if err = first(err, checkName("id", in.Id, 1)); err != nil {
		return nil, err
	}
	k, err := s.store.RevokeKey(ctx, who, req, in.Id)
	if err != nil {
		return nil, err
	}
	return &pb.RevokeKeyResponse{Key: KeyToProto(k)}, nil
}

const rolePrefix = "ROLE_"

func keyFromProto(in *pb.CreateKeyRequest, now time.Time) (definition.Key, error) {
	expires, err := readMoment("expire_time", in.ExpireTime)
	if err != nil {
		return definition.Key{}, err
	}
	if expires.IsZero() {
		expires = now.Add(definition.KeyLifeDefault).UTC().Truncate(time.Second)
	}
	k := definition.Key{Principal: in.Principal, Labels: in.Labels, Sources: in.Sources, ExpiresAt: expires}
	seen := map[pb.Role]bool{}
	for i, r := range in.Roles {
		if seen[r] {
			continue
		}
		seen[r] = true
		p, err := definition.ParsePermission(strings.ToLower(strings.TrimPrefix(r.String(), rolePrefix)))
		if err != nil {
			return k, definition.Invalid(fmt.Sprintf("roles[%d]", i), "%d: want READER, POSTER, AUTHOR, APPROVER, REVIEWER or ADMIN", r)
		}
		k.Roles = append(k.Roles, p)
	}
	return k, k.Check(now)
}

// KeyToProto gives a key in the contract's form.
func KeyToProto(k definition.Key) *pb.Key {
	out := &pb.Key{
		Id: k.ID, Principal: k.Principal, Labels: k.Labels, Sources: k.Sources,
		CreateTime: timeToProto(k.CreatedAt), ExpireTime: timeToProto(k.ExpiresAt), RevokeTime: timeToProto(k.RevokedAt),
	}
	for _, r := range k.Roles {
		out.Roles = append(out.Roles, pb.Role(pb.Role_value[rolePrefix+strings.ToUpper(string(r))]))
	}
	return out
}
