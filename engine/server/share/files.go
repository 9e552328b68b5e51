package share

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/nats-io/nats.go/jetstream"
)

// mapBucket holds the files of maps, by fingerprint.
const mapBucket = "LEADLINE_MAPS"

// fileName is of a file's metadata: its name, by whose end it is opened.
const fileName = "file"

// Files are at the broker, each under what sums it up: what has the same sum is the
// same file.
type Files struct {
	store jetstream.ObjectStore
	// For how long the broker keeps one; 0 is without end.
	keeps time.Duration
}

// OpenMapFiles opens the files of maps.
func OpenMapFiles(ctx context.Context, js jetstream.JetStream, replicas int) (*Files, error) {
	return OpenFiles(ctx, js, jetstream.ObjectStoreConfig{Bucket: mapBucket, Description: "maps of Leadline servers", Replicas: replicas})
}

// OpenFiles opens a bucket of files, or makes it.
func OpenFiles(ctx context.Context, js jetstream.JetStream, c jetstream.ObjectStoreConfig) (*Files, error) {
	c.Replicas = max(c.Replicas, 1)
	store, err := js.ObjectStore(ctx, c.Bucket)
	if errors.Is(err, jetstream.ErrBucketNotFound) {
		store, err = js.CreateObjectStore(ctx, c)
		if errors.Is(err, jetstream.ErrBucketExists) { // another one was faster
			store, err = js.ObjectStore(ctx, c.Bucket)
		}
	}
	if err != nil {
		return nil, fmt.Errorf("share: opening the broker's store %s: %w", c.Bucket, err)
	}
	return &Files{store, c.TTL}, nil
}

// Keep stores a file, unless it is there and stays for a good while.
func (x *Files) Keep(ctx context.Context, sum, path string) error {
	if info, err := x.store.GetInfo(ctx, sum); err == nil && (x.keeps == 0 || time.Since(info.ModTime) < x.keeps/2) {
		return nil
	}
	f, err := os.Open(path)
	if err != nil {
		return fmt.Errorf("share: %w", err)
	}
	defer f.Close()
	meta := jetstream.ObjectMeta{Name: sum, Metadata: map[string]string{fileName: filepath.Base(path)}}
	if _, err := x.store.Put(ctx, meta, f); err != nil {
		return fmt.Errorf("share: storing %s: %w", path, err)
	}
	return nil
}

// Fetch writes a file into a folder of its own in another one, and returns its path.
func (x *Files) Fetch(ctx context.Context, sum, folder string) (string, error) {
	info, err := x.store.GetInfo(ctx, sum)
	if err != nil {
		return "", fmt.Errorf("share: the broker has no file %s: %w", sum, err)
	}
	name := info.Metadata[fileName]
	if name == "" || name != filepath.Base(name) || strings.HasPrefix(name, ".") {
		return "", fmt.Errorf("share: the file %s is stored as %q, which is no file's name", sum, name)
	}
	own, err := os.MkdirTemp(folder, "file-*")
	if err != nil {
		return "", fmt.Errorf("share: %w", err)
	}
	path := filepath.Join(own, name)
	if err := x.store.GetFile(ctx, sum, path); err != nil { // it compares the file with its digest
		return "", fmt.Errorf("share: fetching %s, %s: %w", name, sum, err)
	}
	return path, nil
}

// Remove takes a file away; that there is none is no error.
func (x *Files) Remove(ctx context.Context, sum string) error {
	if err := x.store.Delete(ctx, sum); err != nil && !errors.Is(err, jetstream.ErrObjectNotFound) {
		return fmt.Errorf("share: removing %s: %w", sum, err)
	}
	return nil
}
