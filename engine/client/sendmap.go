package client

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"

	"google.golang.org/grpc"

	leadlinev1 "leadline/proto/leadline/v1"
)

// mapChunk is how much of a map travels in one message.
const mapChunk = 512 << 10

// SendMap uploads a compiled map, which is read twice: for its checksum, and to
// send it. Name, kind and replace of the beginning are the caller's; size and
// checksum are filled in. progress, if set, hears how many bytes are sent.
func SendMap(ctx context.Context, conn grpc.ClientConnInterface, b *leadlinev1.MapBeginning, file io.ReadSeeker, progress func(sent, of int64)) (*leadlinev1.MapDescription, error) {
	sum := sha256.New()
	size, err := io.Copy(sum, file)
	if err != nil {
		return nil, err
	}
	if _, err := file.Seek(0, io.SeekStart); err != nil {
		return nil, err
	}
	b.Bytes, b.Sha256 = uint64(size), hex.EncodeToString(sum.Sum(nil))
	ctx, cancel := context.WithCancel(ctx)
	defer cancel()
	st, err := leadlinev1.NewPositionServiceClient(conn).UploadMap(ctx)
	if err != nil {
		return nil, err
	}
	err = st.Send(&leadlinev1.UploadMapRequest{Message: &leadlinev1.UploadMapRequest_Beginning{Beginning: b}})
	for sent := int64(0); err == nil && sent < size; {
		chunk := make([]byte, min(mapChunk, size-sent)) // Send keeps it for a while
		if _, err := io.ReadFull(file, chunk); err != nil {
			return nil, fmt.Errorf("the file has changed while it was sent: %w", err)
		}
		err = st.Send(&leadlinev1.UploadMapRequest{Message: &leadlinev1.UploadMapRequest_Chunk{Chunk: chunk}})
		if sent += int64(len(chunk)); progress != nil {
			progress(sent, size)
		}
	}
	if err != nil && !errors.Is(err, io.EOF) { // EOF: CloseAndRecv says why
		return nil, err
	}
	r, err := st.CloseAndRecv()
	return r.GetMap(), err
}
