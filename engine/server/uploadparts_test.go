package server

import (
	"context"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/metadata"
	"google.golang.org/grpc/status"

	leadlinev1 "leadline/proto/leadline/v1"
)

// partOf sends one part of a map.
func partOf(ctx context.Context, conn *grpc.ClientConn, upload string, offset int, chunk string) (*leadlinev1.UploadMapPartResponse, error) {
	return leadlinev1.NewPositionServiceClient(conn).UploadMapPart(ctx, &leadlinev1.UploadMapPartRequest{Message: &leadlinev1.UploadMapPartRequest_Part{
		Part: &leadlinev1.MapPart{Upload: upload, Offset: uint64(offset), Chunk: []byte(chunk)},
	}})
}

func beginPart(ctx context.Context, conn *grpc.ClientConn, b *leadlinev1.MapBeginning) (string, error) {
	resp, err := leadlinev1.NewPositionServiceClient(conn).UploadMapPart(ctx, &leadlinev1.UploadMapPartRequest{Message: &leadlinev1.UploadMapPartRequest_Beginning{Beginning: b}})
	return resp.GetUpload(), err
}

// inParts sends a whole map, so many bytes at a time.
func inParts(ctx context.Context, conn *grpc.ClientConn, b *leadlinev1.MapBeginning, content string, size int) (*leadlinev1.MapDescription, error) {
	name, err := beginPart(ctx, conn, b)
	if err != nil {
		return nil, err
	}
	for at := 0; ; at += size {
		resp, err := partOf(ctx, conn, name, at, content[at:min(at+size, len(content))])
		if err != nil || at+size >= len(content) {
			return resp.GetMap(), err
		}
	}
}

// TestUploadParts: a map that comes by calls is there as one that comes by a stream, whatever its
// parts; what is wrong with it is said as there, and leaves neither a file nor a map behind.
func TestUploadParts(t *testing.T) {
	folder := t.TempDir()
	var s shelf
	access, token := byToken(t)
	_, conn := serve(t, Config{NewSession: newTally, Uploads: s.uploads(folder), Access: access, Limits: Limits{OpenTimeout: 200 * time.Millisecond}})
	kay := metadata.AppendToOutgoingContext(limited(t), "authorization", "Bearer "+token("Kay", "roles", "administrator"))
	const content = "plane one"
	for size := 1; size <= len(content); size += 4 {
		b := beginning("bay", content)
		b.Replace = true
		if m, err := inParts(kay, conn, b, content, size); err != nil || m.GetFingerprint() != "one" || m.GetName() != "bay" {
			t.Errorf("by %d bytes: %v, %v", size, m, err)
		}
	}
	begin := func(b *leadlinev1.MapBeginning) string {
		t.Helper()
		name, err := beginPart(kay, conn, b)
		if err != nil {
			t.Fatal(err)
		}
		return name
	}

	_, err := beginPart(kay, conn, beginning("bay", content))
	wantStatus(t, "the same again", err, codes.AlreadyExists, `there is a map "bay" here`)
	_, err = inParts(kay, conn, beginning("cove", "nonsense"), "nonsense", 5)
	wantStatus(t, "damaged", err, codes.InvalidArgument, "upload: the file: it is damaged")
	bad := beginning("cove", content)
	bad.Sha256 = beginning("cove", "another").GetSha256()
	_, err = inParts(kay, conn, bad, content, 5)
	wantStatus(t, "another sum", err, codes.InvalidArgument, "has the sha256")
	_, err = leadlinev1.NewPositionServiceClient(conn).UploadMapPart(kay, &leadlinev1.UploadMapPartRequest{})
	wantStatus(t, "nothing", err, codes.InvalidArgument, "the request is empty")

	// Out of order, and more than announced.
	name := begin(beginning("cove", content))
	_, err = partOf(kay, conn, name, 1, content[1:])
	wantStatus(t, "the second part first", err, codes.FailedPrecondition, "a part from byte 1 on, after 0 bytes")
	if _, err = partOf(kay, conn, name, 0, content[:4]); err != nil {
		t.Error(err)
	}
	_, err = partOf(kay, conn, name, 0, content[:4])
	wantStatus(t, "the same part again", err, codes.FailedPrecondition, "a part from byte 0 on, after 4 bytes")
	_, err = partOf(kay, conn, name, 4, content[4:]+"!")
	wantStatus(t, "too much", err, codes.InvalidArgument, "more than the 9 bytes")

	// Another one's, who may upload, too; given up; silent; and both places taken.
	lee := metadata.AppendToOutgoingContext(limited(t), "authorization", "Bearer "+token("Lee", "roles", "administrator"))
	name = begin(beginning("cove", content))
	_, err = partOf(lee, conn, name, 0, content)
	wantStatus(t, "another one's", err, codes.InvalidArgument, "there is no upload")
	silent := begin(beginning("creek", content))
	_, err = beginPart(kay, conn, beginning("inlet", content))
	wantStatus(t, "a third at once", err, codes.ResourceExhausted, "the server takes 2 maps at once")
	if _, err := leadlinev1.NewPositionServiceClient(conn).UploadMapPart(kay, &leadlinev1.UploadMapPartRequest{Message: &leadlinev1.UploadMapPartRequest_GiveUp{GiveUp: name}}); err != nil {
		t.Error(err)
	}
	if _, err := inParts(kay, conn, beginning("cove", content), content, 4); err != nil {
		t.Errorf("in the place of the one that was given up: %v", err)
	}
	until := func(what string, before, code codes.Code, words string) {
		t.Helper()
		for {
			_, err := partOf(kay, conn, silent, 1, content) // never its turn
			if status.Code(err) != before {
				wantStatus(t, what, err, code, words)
				return
			}
			time.Sleep(10 * time.Millisecond)
		}
	}
	until("after silence", codes.FailedPrecondition, codes.DeadlineExceeded, "no message for 200ms")
	until("long after silence", codes.DeadlineExceeded, codes.InvalidArgument, "was given up when nothing came for 200ms")
	if got := files(t, folder); len(got) != 2 || got[0] != "bay.heights.x" || got[1] != "cove.heights.x" {
		t.Errorf("the folder holds %q", got)
	}
}
