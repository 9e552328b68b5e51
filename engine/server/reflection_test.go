package server

import (
	"slices"
	"testing"

	reflectionv1 "google.golang.org/grpc/reflection/grpc_reflection_v1"
	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/types/descriptorpb"

	leadlinev1 "leadline/proto/leadline/v1"
)

// TestReflection: a client that knows nothing learns which services there are,
// and what the file of ours says.
func TestReflection(t *testing.T) {
	_, conn := serve(t, Config{})
	st, err := reflectionv1.NewServerReflectionClient(conn).ServerReflectionInfo(limited(t))
	if err != nil {
		t.Fatal(err)
	}
	ask := func(req *reflectionv1.ServerReflectionRequest) *reflectionv1.ServerReflectionResponse {
		t.Helper()
		if err := st.Send(req); err != nil {
			t.Fatal(err)
		}
		resp, err := st.Recv()
		if err != nil {
			t.Fatal(err)
		}
		return resp
	}
	var names []string
	for _, s := range ask(&reflectionv1.ServerReflectionRequest{MessageRequest: &reflectionv1.ServerReflectionRequest_ListServices{}}).GetListServicesResponse().GetService() {
		names = append(names, s.GetName())
	}
	ours := leadlinev1.PositionService_ServiceDesc.ServiceName
	for _, want := range []string{ours, "grpc.health.v1.Health"} {
		if !slices.Contains(names, want) {
			t.Errorf("%s is not among %v", want, names)
		}
	}
	files := ask(&reflectionv1.ServerReflectionRequest{MessageRequest: &reflectionv1.ServerReflectionRequest_FileContainingSymbol{FileContainingSymbol: ours}}).GetFileDescriptorResponse().GetFileDescriptorProto()
	var methods []string
	for _, b := range files {
		file := &descriptorpb.FileDescriptorProto{}
		if err := proto.Unmarshal(b, file); err != nil {
			t.Fatal(err)
		}
		for _, s := range file.GetService() {
			for _, m := range s.GetMethod() {
				methods = append(methods, m.GetName())
			}
		}
	}
	if n := len(leadlinev1.PositionService_ServiceDesc.Methods) + len(leadlinev1.PositionService_ServiceDesc.Streams); len(methods) != n {
		t.Errorf("%d calls of %d: %v", len(methods), n, methods)
	}
	if err := st.CloseSend(); err != nil {
		t.Error(err)
	}
}
