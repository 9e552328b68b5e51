package heightfile

import (
	"encoding/binary"
	"errors"
	"fmt"
	"hash/crc32"
	"io"
	"io/fs"
	"math"
	"os"
	"path/filepath"

	"leadline/terrain"
)

// Write writes a compiled map, whole or not at all: into a temporary file
// beside path, flushed to the disk, then renamed.
func Write(path string, r *terrain.Raster) (err error) {
	fail := func(err error) error { return fmt.Errorf("writing heights to %s: %w", path, err) }
	m := r.Meta()
	for _, s := range []string{m.VerticalDatum, m.Source, m.Licence} {
		if s != clean(s) || len(s) > maxText {
			return fail(fmt.Errorf("the text %.60q is too long or has characters that no container holds", s))
		}
	}
	dir := filepath.Dir(path)
	f, err := os.CreateTemp(dir, "."+filepath.Base(path)+".*")
	if err != nil {
		var system *fs.PathError
		if errors.As(err, &system) { // it names the file beside path
			err = system.Err
		}
		return fail(err)
	}
	defer func() {
		if err != nil {
			f.Close()
			os.Remove(f.Name())
		}
	}()
	if err := writeTo(f, r); err != nil {
		return fail(err)
	}
	for _, step := range []func() error{
		func() error { return f.Chmod(0o644) }, f.Sync, f.Close,
		func() error { return os.Rename(f.Name(), path) },
	} {
		if err := step(); err != nil {
			return fail(err)
		}
	}
	if d, err := os.Open(dir); err == nil { // the rename itself; not every system can
		_ = d.Sync()
		d.Close()
	}
	return nil
}

// writeTo writes the strips, then the header with their checksums.
func writeTo(f io.WriterAt, r *terrain.Raster) error {
	g, heights := r.Grid(), r.Samples()
	crc := make([]uint32, strips(g))
	head, err := header(r, crc)
	if err != nil {
		return err
	}
	at := int64(len(head))
	per := rowsPerStrip(g) * g.Cols
	buf := make([]byte, 4*per)
	for i := range crc {
		strip := heights[i*per : min((i+1)*per, len(heights))]
		for k, h := range strip {
			binary.LittleEndian.PutUint32(buf[4*k:], math.Float32bits(h))
		}
		b := buf[:4*len(strip)]
		crc[i] = crc32.Checksum(b, castagnoli)
		if _, err := f.WriteAt(b, at); err != nil {
			return err
		}
		at += int64(len(b))
	}
	if head, err = header(r, crc); err != nil {
		return err
	}
	_, err = f.WriteAt(head, 0)
	return err
}
