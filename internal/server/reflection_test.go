package server_test

import (
	"context"
	"testing"

	reflectionpb "google.golang.org/grpc/reflection/grpc_reflection_v1"

	"limitary/internal/server"
)

func TestReflectionShowsTheContractWithoutAKey(t *testing.T) {
	f := newFixture(t, server.Options{})
	stream, err := reflectionpb.NewServerReflectionClient(f.conn).ServerReflectionInfo(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	ask := func(r *reflectionpb.ServerReflectionRequest) *reflectionpb.ServerReflectionResponse {
		t.Helper()
		if err := stream.Send(r); err != nil {
			t.Fatal(err)
		}
		answer, err := stream.Recv()
		if err != nil {
			t.Fatal(err)
		}
		return answer
	}
	found := map[string]bool{}
	list := ask(&reflectionpb.ServerReflectionRequest{MessageRequest: &reflectionpb.ServerReflectionRequest_ListServices{}})
	for _, s := range list.GetListServicesResponse().GetService() {
		found[s.Name] = true
	}
	for _, name := range []string{"Chart", "Limit", "Evaluation", "Signal", "Rule", "Key"} {
		if !found["limitary.v1."+name+"Service"] {
			t.Errorf("limitary.v1.%sService is not listed among %v", name, found)
		}
	}
	file := ask(&reflectionpb.ServerReflectionRequest{MessageRequest: &reflectionpb.ServerReflectionRequest_FileContainingSymbol{FileContainingSymbol: "limitary.v1.EvaluationService"}})
	if len(file.GetFileDescriptorResponse().GetFileDescriptorProto()) == 0 {
		t.Errorf("got %v", file)
	}
}
