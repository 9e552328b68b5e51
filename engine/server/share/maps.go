package share

import (
	"context"
	"encoding/base64"
	"errors"
	"fmt"
	"strings"

	"github.com/nats-io/nats.go/jetstream"
)

// mapPrefix begins the keys that say which map a name stands for.
const mapPrefix = "map."

// Maps are those that servers share: files under their fingerprints, and names for
// some of them.
type Maps struct {
	kv jetstream.KeyValue
	*Files
}

// OpenMaps opens what there is.
func OpenMaps(ctx context.Context, js jetstream.JetStream, replicas int) (*Maps, error) {
	kv, err := openKeys(ctx, js, replicas)
	if err != nil {
		return nil, err
	}
	files, err := OpenMapFiles(ctx, js, replicas)
	if err != nil {
		return nil, err
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
