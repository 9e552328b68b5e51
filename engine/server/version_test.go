package server

import (
	"testing"

	"google.golang.org/grpc"
	healthv1 "google.golang.org/grpc/health/grpc_health_v1"
	"google.golang.org/grpc/metadata"
	"google.golang.org/protobuf/types/known/emptypb"

	"leadline/engine/client"
	leadlinev1 "leadline/proto/leadline/v1"
)

// TestVersion proves that every answer names the server's version: each call in
// its header, also one that fails or that nobody knows, and a stream before it
// has anything to say; and the messages that have a field for it.
func TestVersion(t *testing.T) {
	const version = "v7-of-a-test"
	_, conn := serve(t, Config{Version: version})
	check := func(what string, header metadata.MD) {
		t.Helper()
		if got := header.Get("leadline-version"); len(got) != 1 || got[0] != version {
			t.Errorf("%s: the header says %q", what, got)
		}
	}
	ctx := limited(t)
	api := leadlinev1.NewPositionServiceClient(conn)
	silent, err := api.Feed(ctx)
	if err != nil {
		t.Fatal(err)
	}
	h, err := silent.Header()
	if err != nil {
		t.Fatal(err)
	}
	check("a stream that is silent", h)
	if err := silent.CloseSend(); err != nil {
		t.Fatal(err)
	}
	if ends(silent) == nil {
		t.Error("a stream without open ends well")
	}

	st, opened := openRaw(t, conn, &leadlinev1.Open{Header: header("w"), Drive: "d"})
	if opened.GetVersion() != version {
		t.Errorf("opened says %q", opened.GetVersion())
	}
	_ = st.CloseSend()
	closed, err := fed(ctx, conn, client.Drive{Header: header("v")}, voyage(1, 2))
	if err != nil || closed.GetVersion() != version {
		t.Errorf("closed says %v, %v", closed, err)
	}
	var where, failed, unknown, health metadata.MD
	resp, err := api.Where(ctx, &leadlinev1.WhereRequest{Vehicles: []string{"v"}}, grpc.Header(&where))
	if err != nil || resp.GetVersion() != version {
		t.Errorf("where says %v, %v", resp, err)
	}
	check("where", where)
	if _, err := api.Where(ctx, &leadlinev1.WhereRequest{}, grpc.Header(&failed)); err == nil {
		t.Error("a question about nobody has an answer")
	}
	check("a failed call", failed)
	if err := conn.Invoke(ctx, "/leadline.v2.Teleporter/Go", &emptypb.Empty{}, &emptypb.Empty{}, grpc.Header(&unknown)); err == nil {
		t.Error("an unknown call has an answer")
	}
	check("an unknown call", unknown)
	if _, err := healthv1.NewHealthClient(conn).Check(ctx, &healthv1.HealthCheckRequest{}, grpc.Header(&health)); err != nil {
		t.Error(err)
	}
	check("the health service", health)
}
