package main

import (
	"strconv"
	"strings"
	"text/tabwriter"
	"time"

	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/types/known/timestamppb"
)

// printJSON writes an answer as the API's own JSON and gives the exit code.
func printJSON(env *environment, m proto.Message) int {
	if err := writeJSON(env.Stdout, m); err != nil {
		return fail(env, "%v", err)
	}
	return exitOK
}

func flush(env *environment, w *tabwriter.Writer) int {
	if err := w.Flush(); err != nil {
		return fail(env, "%v", err)
	}
	return exitOK
}

// enumWord gives the name of an enum value without its type's prefix.
func enumWord(name, prefix string) string { return strings.TrimPrefix(name, prefix) }

func dash(s string) string {
	if s == "" {
		return "-"
	}
	return s
}

func versionName(v int32) string {
	if v == 0 {
		return "none"
	}
	return strconv.Itoa(int(v))
}

func protoTime(t *timestamppb.Timestamp) string {
	if t == nil {
		return "-"
	}
	return t.AsTime().Format(time.RFC3339Nano)
}
