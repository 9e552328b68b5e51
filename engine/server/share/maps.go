package share

import (
	"context"
	"encoding/base64"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"github.com/nats-io/nats.go/jetstream"
)

// mapBucket holds the files of maps, by fingerprint; mapPrefix begins the keys that
// say which one a name stands for.
const (
	mapBucket = "LEADLINE_MAPS"
	mapPrefix = "map."
	fileName  = "file" // of a file's metadata: its name, by whose end it is opened
)

// Maps are those that servers share: files under their fingerprints, and names for
// some of them.
type Maps struct {
	kv    jetstream.KeyValue
	files jetstream.ObjectStore
}

// OpenMaps opens what there is.
func OpenMaps(ctx context.Context, js jetstream.JetStream, replicas int) (*Maps, error) {
	kv, err := openKeys(ctx, js, replicas)
	if err != nil {
		return nil, err
	}
	files, err := js.ObjectStore(ctx, mapBucket)
	if errors.Is(err, jetstream.ErrBucketNotFound) {
		files, err = js.CreateObjectStore(ctx, jetstream.ObjectStoreConfig{Bucket: mapBucket, Description: "maps of Leadline servers", Replicas: max(replicas, 1)})
		if errors.Is(err, jetstream.ErrBucketExists) { // another one was faster
			files, err = js.ObjectStore(ctx, mapBucket)
		}
	}
	if err != nil {
		return nil, fmt.Errorf("share: opening the broker's store %s: %w", mapBucket, err)
	}
	return &Maps{kv, files}, nil
}

// keyOf is the key of a name, which may hold what keys may not.
func keyOf(name string) string { return mapPrefix + base64.RawURLEncoding.EncodeToString([]byte(name)) }

// Names are all that there are.
func (m *Maps) Names(ctx context.Context) (names []string, err error) {
	keys, err := m.kv.ListKeysFiltered(ctx, mapPrefix+"*")
	if err != nil {
		return nil, fmt.Errorf("share: listing maps: %w", err)
	}
	for k := range keys.Keys() {
		if name, err := base64.RawURLEncoding.DecodeString(strings.TrimPrefix(k, mapPrefix)); err == nil {
			names = append(names, string(name))
		}
	}
	return names, nil
}

// Named is the fingerprint that a name stands for; empty if it is nobody's.
func (m *Maps) Named(ctx context.Context, name string) (string, error) {
	e, err := m.kv.Get(ctx, keyOf(name))
	if errors.Is(err, jetstream.ErrKeyNotFound) {
		return "", nil
	}
	if err != nil {
		return "", fmt.Errorf("share: asking which map %s is: %w", name, err)
	}
	return string(e.Value()), nil
}

// Name gives a name to a map, which takes the place of another one's if replace is
// set, and returns whose it is then.
func (m *Maps) Name(ctx context.Context, name, fingerprint string, replace bool) (string, error) {
	var err error
	if replace {
		_, err = m.kv.Put(ctx, keyOf(name), []byte(fingerprint))
	} else if _, err = m.kv.Create(ctx, keyOf(name), []byte(fingerprint)); errors.Is(err, jetstream.ErrKeyExists) {
		return m.Named(ctx, name)
	}
	if err != nil {
		return "", fmt.Errorf("share: naming map %s: %w", name, err)
	}
	return fingerprint, nil
}

// Keep stores a map's file, unless it is there.
func (m *Maps) Keep(ctx context.Context, fingerprint, path string) error {
	if _, err := m.files.GetInfo(ctx, fingerprint); err == nil {
		return nil
	}
	f, err := os.Open(path)
	if err != nil {
		return fmt.Errorf("share: %w", err)
	}
	defer f.Close()
	meta := jetstream.ObjectMeta{Name: fingerprint, Metadata: map[string]string{fileName: filepath.Base(path)}}
	if _, err := m.files.Put(ctx, meta, f); err != nil {
		return fmt.Errorf("share: storing map %s: %w", path, err)
	}
	return nil
}

// Fetch writes a map's file into a folder, and returns its path.
func (m *Maps) Fetch(ctx context.Context, fingerprint, folder string) (string, error) {
	info, err := m.files.GetInfo(ctx, fingerprint)
	if err != nil {
		return "", fmt.Errorf("share: no server has stored the map %s: %w", fingerprint, err)
	}
	name := info.Metadata[fileName]
	if name == "" || name != filepath.Base(name) || strings.HasPrefix(name, ".") {
		return "", fmt.Errorf("share: the map %s is stored as %q, which is no file's name", fingerprint, name)
	}
	own, err := os.MkdirTemp(folder, "map-*")
	if err != nil {
		return "", fmt.Errorf("share: %w", err)
	}
	path := filepath.Join(own, name)
	if err := m.files.GetFile(ctx, fingerprint, path); err != nil { // it compares the file with its digest
		return "", fmt.Errorf("share: fetching map %s: %w", fingerprint, err)
	}
	return path, nil
}
