package main

import (
	"context"
	"crypto/rand"
	"crypto/sha256"
	"fmt"
	"strings"
	"text/tabwriter"
	"time"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
	"limitary/internal/store"
	"limitary/service"
)

const keyAbout = `Keys belong to principals: a person, or a system. These commands work on the database itself, so that the first key
can be made; later ones can also be made over the API with a key of role admin.

  limitary key create --name PRINCIPAL --role ROLE[,ROLE] [flags]   prints the bearer token, once
  limitary key list [flags]
  limitary key revoke ID [flags]

Roles: reader, poster, author, approver, reviewer, admin. Author and approver of a version are always two principals.`

// atDatabase is the principal that the audit chain names for what is done on the database itself.
var atDatabase = store.Actor{Principal: "command line"}

func runKey(ctx context.Context, env *environment, args []string) int {
	subcommands := map[string]func(context.Context, *environment, []string) int{"create": keyCreate, "list": keyList, "revoke": keyRevoke}
	return dispatch(ctx, env, "key", keyAbout, subcommands, args)
}

// dispatch runs the word after a command.
func dispatch(ctx context.Context, env *environment, name, about string, subcommands map[string]func(context.Context, *environment, []string) int, args []string) int {
	f := newFlags(env, name+" SUBCOMMAND [flags] [arguments]", about)
	if len(args) > 0 {
		if run, ok := subcommands[args[0]]; ok {
			return run(ctx, env, args[1:])
		}
	}
	if _, code, done := f.parse(args, 1, 1); done {
		return code
	}
	return f.wrong("there is no \"%s %s\"", name, args[0])
}

func keyCreate(ctx context.Context, env *environment, args []string) int {
	f := newFlags(env, "key create --name PRINCIPAL --role ROLE[,ROLE] [flags]", "Makes a key and prints its bearer token, which is not shown again.")
	var flags databaseFlags
	flags.add(f)
	name := f.String("name", "", "`PRINCIPAL` the key belongs to; required")
	roles := f.String("role", "", "`ROLE[,ROLE]`: reader, poster, author, approver, reviewer, admin; required")
	expires := f.Duration("life", definition.KeyLifeDefault, "how long the key is valid, at most five years")
	var labels labelMap
	f.Var(&labels, "label", "`KEY=VALUE` that a chart must have for the key to see it; may be repeated")
	var sources listFlag
	f.Var(&sources, "source", "`SOURCE` the key may post as; may be repeated (default: any); results of a source named here count as the key's own to amend and void")
	asJSON := keyJSON(f)
	if _, code, done := f.parse(args, 0, 0); done {
		return code
	}
	if *name == "" || *roles == "" {
		return f.wrong("--name and --role are required")
	}
	now := env.Now()
	k := definition.Key{Principal: *name, Labels: labels, Sources: sources, ExpiresAt: now.Add(*expires).UTC().Truncate(time.Second)}
	for _, r := range strings.Split(*roles, ",") {
		p, err := definition.ParsePermission(strings.TrimSpace(r))
		if err != nil {
			return f.wrong("%v", err)
		}
		k.Roles = append(k.Roles, p)
	}
	if err := k.Check(now); err != nil {
		return f.wrong("%v", err)
	}
	return withStore(ctx, env, &flags, func(s *store.Store) int {
		made, token, err := makeKey(ctx, s, k)
		if err != nil {
			return fail(env, "%v", err)
		}
		if *asJSON {
			return printJSON(env, &pb.CreateKeyResponse{Key: service.KeyToProto(made), Token: token})
		}
		fmt.Fprintf(env.Stderr, "key %s of %s, roles %s, valid until %s; the token is not shown again:\n",
			made.ID, made.Principal, roleNames(made), made.ExpiresAt.Format(time.RFC3339))
		fmt.Fprintln(env.Stdout, token)
		return exitOK
	})
}

// makeKey stores a key with a fresh secret and gives its token.
func makeKey(ctx context.Context, s *store.Store, k definition.Key) (definition.Key, string, error) {
	id, token, hash, err := service.NewToken(rand.Reader)
	if err != nil {
		return k, "", err
	}
	k.ID = id
	k, _, err = s.CreateKey(ctx, atDatabase, onceOnly("key create", id), k, hash)
	return k, token, err
}

// onceOnly is a request that is never repeated: each call has its own id.
func onceOnly(method, about string) store.Request {
	sum := sha256.Sum256([]byte(about))
	return store.Request{ID: rand.Text(), Method: method, Digest: sum[:]}
}

func roleNames(k definition.Key) string {
	names := make([]string, len(k.Roles))
	for i, r := range k.Roles {
		names[i] = string(r)
	}
	return strings.Join(names, ",")
}

// listPage is how many items a command asks for at a time.
const listPage = 500

func keyList(ctx context.Context, env *environment, args []string) int {
	f := newFlags(env, "key list [flags]", "Lists keys, without their secrets.")
	var flags databaseFlags
	flags.add(f)
	all := f.Bool("all", false, "revoked keys too")
	asJSON := keyJSON(f)
	if _, code, done := f.parse(args, 0, 0); done {
		return code
	}
	return withStore(ctx, env, &flags, func(s *store.Store) int {
		var list []definition.Key
		for page := (store.Page{Size: listPage}); ; {
			keys, next, err := s.ListKeys(ctx, atDatabase, page, *all)
			if err != nil {
				return fail(env, "%v", err)
			}
			list = append(list, keys...)
			if page.Token = next; next == "" {
				return printKeys(env, list, *asJSON)
			}
		}
	})
}

// keyJSON defines the flag --json.
func keyJSON(f *flagSet) *bool { return f.Bool("json", false, "write the API's own JSON") }

func printKeys(env *environment, list []definition.Key, asJSON bool) int {
	if asJSON {
		out := &pb.ListKeysResponse{}
		for _, k := range list {
			out.Keys = append(out.Keys, service.KeyToProto(k))
		}
		return printJSON(env, out)
	}
	w := tabwriter.NewWriter(env.Stdout, 0, 8, 2, ' ', 0)
	fmt.Fprintln(w, "ID\tPRINCIPAL\tROLES\tLABELS\tEXPIRES\tREVOKED")
	for _, k := range list {
		labels := labelMap(k.Labels)
		fmt.Fprintf(w, "%s\t%s\t%s\t%s\t%s\t%s\n", k.ID, k.Principal, roleNames(k), labels.String(), shortTime(k.ExpiresAt), shortTime(k.RevokedAt))
	}
	if err := w.Flush(); err != nil {
		return fail(env, "%v", err)
	}
	return exitOK
}

func shortTime(t time.Time) string {
	if t.IsZero() {
		return "-"
	}
	return t.UTC().Format("2006-01-02T15:04Z")
}

func keyRevoke(ctx context.Context, env *environment, args []string) int {
	f := newFlags(env, "key revoke ID [flags]", "Ends a key at once. ID is the part of the token between lim_ and the next _.")
	var flags databaseFlags
	flags.add(f)
	asJSON := keyJSON(f)
	rest, code, done := f.parse(args, 1, 1)
	if done {
		return code
	}
	return withStore(ctx, env, &flags, func(s *store.Store) int {
		k, err := s.RevokeKey(ctx, atDatabase, onceOnly("key revoke", rest[0]), rest[0])
		if err != nil {
			return fail(env, "%v", err)
		}
		if *asJSON {
			return printJSON(env, &pb.RevokeKeyResponse{Key: service.KeyToProto(k)})
		}
		fmt.Fprintf(env.Stdout, "key %s of %s is revoked\n", k.ID, k.Principal)
		return exitOK
	})
}
