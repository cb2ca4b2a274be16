package server

import (
	"context"
	"errors"
	"strings"
	"time"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
	"limitary/internal/store"
	"limitary/service"
)

// keyFinder finds a valid key by its id and the hash of its secret.
type keyFinder func(ctx context.Context, id string, secretHash []byte) (definition.Key, error)

// keyring finds out who calls. Every call asks the database, so that a key ends the moment it is revoked; calls with the
// same key that come together share a look-up that begins after they came.
type keyring struct {
	lookups *shared[string, definition.Key]
	find    keyFinder
}

// lookupTimeout bounds one look-up, which no single caller's deadline bounds.
const lookupTimeout = 5 * time.Second

func newKeyring(find keyFinder) *keyring {
	return &keyring{lookups: newShared[string, definition.Key](lookupTimeout), find: find}
}

const bearer = "bearer "

// actor reads the value of an Authorization header.
func (k *keyring) actor(ctx context.Context, authorization string) (store.Actor, error) {
	id, hash, err := credentialsOf(authorization)
	if err != nil {
		return store.Actor{}, err
	}
	key, err := k.lookups.do(ctx, id+string(hash), func(ctx context.Context) (definition.Key, error) {
		return k.find(ctx, id, hash)
	})
	if errors.Is(err, context.DeadlineExceeded) && ctx.Err() == nil { // the look-up's own time is up, not the caller's
		err = definition.Refuse(definition.Unavailable, "the database does not answer; repeating the request later is safe")
	}
	if err != nil {
		return store.Actor{}, err
	}
	return store.Actor{Principal: key.Principal, Key: key}, nil
}

// credentialsOf takes the header's value apart without asking anybody.
func credentialsOf(authorization string) (id string, secretHash []byte, err error) {
	if authorization == "" {
		return "", nil, definition.Refuse(definition.Unauthenticated, "no key: send \"Authorization: Bearer TOKEN\"")
	}
	if len(authorization) < len(bearer) || !strings.EqualFold(authorization[:len(bearer)], bearer) {
		return "", nil, definition.Refuse(definition.Unauthenticated, "the Authorization header does not begin with \"Bearer \"")
	}
	id, secretHash, ok := service.ParseToken(strings.TrimSpace(authorization[len(bearer):]))
	if !ok {
		return "", nil, definition.Refuse(definition.Unauthenticated, "the bearer token has not the form of a key's token")
	}
	return id, secretHash, nil
}

// permissions says which roles may call a method: any of those listed, or every key where none is. A method that is not
// here is not allowed.
var permissions = map[string][]definition.Permission{
	pb.ChartService_CreateChart_FullMethodName:  {definition.Author},
	pb.ChartService_GetChart_FullMethodName:     {},
	pb.ChartService_ListCharts_FullMethodName:   {},
	pb.ChartService_UpdateChart_FullMethodName:  {definition.Author},
	pb.ChartService_ArchiveChart_FullMethodName: {definition.Admin},
	pb.ChartService_ListTracks_FullMethodName:   {},
	pb.ChartService_StartLot_FullMethodName:     {definition.Author},
	pb.ChartService_AddMark_FullMethodName:      {definition.Author},
	pb.ChartService_ListMarks_FullMethodName:    {},
	pb.ChartService_VoidMark_FullMethodName:     {definition.Author},

	pb.LimitService_ComputeLimits_FullMethodName:   {},
	pb.LimitService_ProposeVersion_FullMethodName:  {definition.Author},
	pb.LimitService_ApproveVersion_FullMethodName:  {definition.Approver},
	pb.LimitService_RejectVersion_FullMethodName:   {definition.Approver},
	pb.LimitService_WithdrawVersion_FullMethodName: {definition.Approver},
	pb.LimitService_GetVersion_FullMethodName:      {},
	pb.LimitService_ListVersions_FullMethodName:    {},

	pb.EvaluationService_EvaluateBatch_FullMethodName:  {},
	pb.EvaluationService_PostResults_FullMethodName:    {definition.Poster},
	pb.EvaluationService_GetResult_FullMethodName:      {},
	pb.EvaluationService_ListResults_FullMethodName:    {},
	pb.EvaluationService_GetRun_FullMethodName:         {},
	pb.EvaluationService_ExplainVerdict_FullMethodName: {},
	pb.EvaluationService_AmendResult_FullMethodName:    {definition.Poster},
	pb.EvaluationService_VoidResult_FullMethodName:     {definition.Poster},
	pb.EvaluationService_ConfirmRequest_FullMethodName: {definition.Approver},
	pb.EvaluationService_ListRequests_FullMethodName:   {},

	pb.SignalService_QuerySignals_FullMethodName:    {},
	pb.SignalService_GetSignal_FullMethodName:       {},
	pb.SignalService_NoteSignal_FullMethodName:      {definition.Reviewer, definition.Poster},
	pb.SignalService_CloseOccurrence_FullMethodName: {definition.Reviewer},
	pb.SignalService_ReleaseTrack_FullMethodName:    {definition.Reviewer},

	pb.RuleService_ListRules_FullMethodName: {},
	pb.RuleService_RunLength_FullMethodName: {},

	pb.KeyService_CreateKey_FullMethodName: {definition.Admin},
	pb.KeyService_ListKeys_FullMethodName:  {definition.Admin},
	pb.KeyService_RevokeKey_FullMethodName: {definition.Admin},
}

// allow refuses a call that the key's roles do not cover.
func allow(method string, key definition.Key) error {
	roles, known := permissions[method]
	if !known {
		return definition.Refuse(definition.RoleMissing, "no role allows %s", method)
	}
	if len(roles) == 0 {
		return nil
	}
	names := make([]string, len(roles))
	for i, r := range roles {
		if key.Has(r) {
			return nil
		}
		names[i] = string(r)
	}
	return definition.Refuse(definition.RoleMissing, "the key has not the role %s", strings.Join(names, " or "))
}
