package afar

import (
	"archive/tar"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"

	"github.com/klauspost/compress/zstd"
)

// maxFiles bounds how many files a run's folder has.
const maxFiles = 1 << 16

// pack writes the files of a folder into one.
func pack(dir, path string) (err error) {
	entries, err := os.ReadDir(dir)
	if err != nil {
		return err
	}
	out, err := os.Create(path)
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, out.Close()) }()
	z, err := zstd.NewWriter(out, zstd.WithEncoderConcurrency(1))
	if err != nil {
		return err
	}
	t := tar.NewWriter(z)
	for _, e := range entries {
		if err := packFile(t, filepath.Join(dir, e.Name())); err != nil {
			return err
		}
	}
	return errors.Join(t.Close(), z.Close())
}

func packFile(t *tar.Writer, path string) error {
	f, err := os.Open(path)
	if err != nil {
		return err
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return err
	}
	if err := t.WriteHeader(&tar.Header{Name: filepath.Base(path), Size: info.Size(), Mode: 0o644}); err != nil {
		return err
	}
	_, err = io.Copy(t, f)
	return err
}

// unpack writes a packed folder's files into another one. They come from another
// machine: none goes elsewhere, whatever it is called.
func unpack(path, dir string) error {
	in, err := os.Open(path)
	if err != nil {
		return err
	}
	defer in.Close()
	z, err := zstd.NewReader(in, zstd.WithDecoderConcurrency(1), zstd.WithDecoderMaxMemory(64<<20))
	if err != nil {
		return err
	}
	defer z.Close()
	t := tar.NewReader(z)
	for n := 0; ; n++ {
		h, err := t.Next()
		if errors.Is(err, io.EOF) {
			return nil
		}
		if err != nil {
			return err
		}
		if h.Typeflag != tar.TypeReg || h.Name != filepath.Base(h.Name) || strings.HasPrefix(h.Name, ".") || strings.ContainsAny(h.Name, `/\`) {
			return fmt.Errorf("a packed folder has %.80q, which is no file's name", h.Name)
		}
		if n == maxFiles {
			return fmt.Errorf("a packed folder has more than %d files", maxFiles)
		}
		if err := unpackFile(t, filepath.Join(dir, h.Name)); err != nil {
			return err
		}
	}
}

func unpackFile(r io.Reader, path string) error {
	f, err := os.Create(path)
	if err != nil {
		return err
	}
	_, err = io.Copy(f, r)
	return errors.Join(err, f.Close())
}
