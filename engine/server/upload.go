package server

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/status"

	leadlinev1 "leadline/proto/leadline/v1"
)

const (
	maxChunk = 1 << 20
	// part begins the name of a file that is not whole yet.
	part = ".part-"
)

type uploadStream = grpc.ClientStreamingServer[leadlinev1.UploadMapRequest, leadlinev1.UploadMapResponse]

// UploadMap takes a map: see the .proto file.
func (s *Server) UploadMap(stream uploadStream) error {
	leave, err := s.mayUpload()
	if err != nil {
		return err
	}
	defer leave()
	messages := make(chan uploaded)
	go receiveMap(stream.Context(), stream, messages) // ends with the stream's context
	first, err := s.nextUploaded(stream.Context(), messages)
	if err != nil && !errors.Is(err, io.EOF) {
		return err
	}
	b := first.GetBeginning()
	if b == nil {
		return refuse(leadlinev1.Reason_REASON_WRONG_MESSAGE, nil, "upload: the first message is not a beginning: send that first")
	}
	if err := s.checkBeginning(b); err != nil {
		return err
	}
	m, err := s.takeMap(stream.Context(), messages, b)
	if err != nil {
		return err
	}
	s.cfg.Log.Info("map uploaded", "map", m.GetName(), "fingerprint", m.GetFingerprint(), "bytes", b.GetBytes())
	return stream.SendAndClose(&leadlinev1.UploadMapResponse{Map: m})
}

// mayUpload says why no map can be taken now. The caller must leave when it is done.
func (s *Server) mayUpload() (leave func(), err error) {
	if s.uploads == nil {
		return nil, refuse(leadlinev1.Reason_REASON_NOT_OFFERED, nil, "upload: this server takes no maps: its operator must name a folder for them")
	}
	select {
	case s.uploading <- struct{}{}:
		return func() { <-s.uploading }, nil
	default:
		return nil, full("uploads", cap(s.uploading), "upload: the server takes %d maps at once: try later", cap(s.uploading))
	}
}

// checkBeginning refuses what need not be sent at all.
func (s *Server) checkBeginning(b *leadlinev1.MapBeginning) error {
	if err := checkMapName(b.GetName()); err != nil {
		return err
	}
	if s.uploads.Suffixes[b.GetKind()] == "" {
		return badField("beginning.kind", "upload: kind %v: give MAP_KIND_ROADS or MAP_KIND_HEIGHTS", b.GetKind())
	}
	if n := b.GetBytes(); n == 0 {
		return badField("beginning.bytes", "upload: bytes is missing: give the size of the file")
	} else if n > uint64(s.uploads.MaxBytes) {
		return badField("beginning.bytes", "upload: the file has %d bytes: at most %d", n, s.uploads.MaxBytes)
	}
	if sum, err := hex.DecodeString(b.GetSha256()); err != nil || len(sum) != sha256.Size {
		return badField("beginning.sha256", "upload: sha256 %q is none: give 64 hexadecimal digits", clip(b.GetSha256()))
	}
	return s.atlas.mayPut(b.GetName(), b.GetKind(), b.GetReplace(), s.uploads.Maps)
}

// takeMap receives a file, opens it and puts the map in.
func (s *Server) takeMap(ctx context.Context, messages <-chan uploaded, b *leadlinev1.MapBeginning) (*leadlinev1.MapDescription, error) {
	suffix := s.uploads.Suffixes[b.GetKind()]
	file, err := os.CreateTemp(s.uploads.Folder, part+"*"+suffix)
	if err != nil {
		return nil, s.cannotKeep(err)
	}
	path := file.Name()
	defer os.Remove(path) // fails once it has its own name
	err = s.receiveFile(ctx, messages, b, file)
	if closed := file.Close(); err == nil && closed != nil {
		err = s.cannotKeep(closed)
	}
	if err != nil {
		return nil, err
	}
	m, err := s.uploads.open(path, b.GetName())
	if err != nil {
		s.cfg.Log.Warn("uploaded map refused", "map", b.GetName(), "error", err)
		what, _, _ := strings.Cut(strings.ReplaceAll(err.Error(), path, "the file"), "\n")
		return nil, refuse(leadlinev1.Reason_REASON_BAD_MAP, about{"map": b.GetName()}, "upload: %s", clip(what))
	}
	if m.kind() != b.GetKind() {
		m.close()
		return nil, refuse(leadlinev1.Reason_REASON_BAD_MAP, about{"map": b.GetName()}, "upload: the file is a map of %s: give that kind", kindWord(m.kind()))
	}
	m.File = filepath.Join(s.uploads.Folder, b.GetName()+suffix)
	old, err := s.atlas.put(m, b.GetReplace(), s.uploads.Maps, func() error {
		if err := os.Rename(path, m.File); err != nil {
			return s.cannotKeep(err)
		}
		if err := syncFolder(s.uploads.Folder); err != nil {
			return s.cannotKeep(err)
		}
		return nil
	})
	if err != nil {
		m.close()
		return nil, err
	}
	if old != nil {
		s.closeMap(old)
	}
	if err := s.shareMap(ctx, m, true); err != nil {
		return nil, s.cannotKeep(err)
	}
	return s.atlas.describe(b.GetName())[0], nil
}

// receiveFile writes a file as it comes, to the disk.
func (s *Server) receiveFile(ctx context.Context, messages <-chan uploaded, b *leadlinev1.MapBeginning, file *os.File) error {
	damaged := func(format string, args ...any) error {
		return refuse(leadlinev1.Reason_REASON_BAD_MAP, about{"map": b.GetName()}, "upload: "+format+": send it again", args...)
	}
	sum := sha256.New()
	for n := uint64(0); ; {
		m, err := s.nextUploaded(ctx, messages)
		switch {
		case errors.Is(err, io.EOF):
			if n < b.GetBytes() {
				return damaged("%d of %d bytes came", n, b.GetBytes())
			}
			if got := hex.EncodeToString(sum.Sum(nil)); !strings.EqualFold(got, b.GetSha256()) {
				return damaged("what came has the sha256 %s, not %s", got, b.GetSha256())
			}
			if err := file.Sync(); err != nil {
				return s.cannotKeep(err)
			}
			return nil
		case err != nil:
			return err
		}
		chunk := m.GetChunk()
		switch n += uint64(len(chunk)); {
		case len(chunk) == 0:
			return refuse(leadlinev1.Reason_REASON_WRONG_MESSAGE, nil, "upload: a message after the beginning without a chunk: send the file's bytes")
		case len(chunk) > maxChunk:
			return badField("chunk", "upload: a chunk of %d bytes: at most %d", len(chunk), maxChunk)
		case n > b.GetBytes():
			return damaged("more than the %d bytes came that were announced", b.GetBytes())
		}
		if _, err := io.MultiWriter(file, sum).Write(chunk); err != nil {
			return s.cannotKeep(err)
		}
	}
}

// cannotKeep tells the operator what is wrong with the folder, and the client
// that something is.
func (s *Server) cannotKeep(err error) error {
	s.cfg.Log.Error("an uploaded map cannot be kept", "folder", s.uploads.Folder, "error", err)
	var p *fs.PathError
	if errors.As(err, &p) {
		err = p.Err
	}
	return refuse(leadlinev1.Reason_REASON_SERVER_FULL, nil, "upload: the server cannot keep the file (%v): tell its operator", err)
}

// syncFolder makes a renaming last.
func syncFolder(path string) error {
	d, err := os.Open(path)
	if err != nil {
		return err
	}
	defer d.Close()
	return d.Sync()
}

// uploaded is what an upload's stream brought.
type uploaded struct {
	message *leadlinev1.UploadMapRequest
	err     error
}

// receiveMap passes on what the stream brings until it brings an error.
func receiveMap(ctx context.Context, stream uploadStream, to chan<- uploaded) {
	for {
		m, err := stream.Recv()
		select {
		case to <- uploaded{m, err}:
		case <-ctx.Done():
			return
		}
		if err != nil {
			return
		}
	}
}

// nextUploaded waits for the next message of an upload; io.EOF after the last.
func (s *Server) nextUploaded(ctx context.Context, messages <-chan uploaded) (*leadlinev1.UploadMapRequest, error) {
	late := time.NewTimer(s.cfg.Limits.OpenTimeout)
	defer late.Stop()
	select {
	case m := <-messages:
		return m.message, m.err
	case <-late.C:
		return nil, refuse(leadlinev1.Reason_REASON_SILENT, nil, "upload: no message for %v: send the map without a pause", s.cfg.Limits.OpenTimeout)
	case <-s.draining:
		return nil, errStopping
	case <-ctx.Done():
		return nil, status.FromContextError(ctx.Err()).Err()
	}
}
