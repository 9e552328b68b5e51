package main

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
)

// writable makes sure that a file can be made in a folder, which a flag's value is, or
// lies in. The file's name begins with a prefix, and it does not stay.
func writable(flag, value, folder, prefix string) error {
	f, err := os.CreateTemp(folder, prefix+"*")
	if err != nil {
		return notWritten(flag, value, folder, err)
	}
	return errors.Join(f.Close(), os.Remove(f.Name()))
}

// notWritten words why nothing can be written into a folder.
func notWritten(flag, value, folder string, err error) error {
	return fmt.Errorf("%s %s: nothing can be written in the folder %s (%w): give one that this program may write, or let it", flag, value, folder, plainPath(err))
}

// folders makes sure that the server can write where it is to keep something.
func (o *serveOptions) folders() error {
	if o.uploads != "" {
		if err := writable("--uploads", o.uploads, o.uploads, ".part-"); err != nil { // what is left of it, the server removes
			return err
		}
	}
	if o.keep.data == "" {
		return nil
	}
	if err := os.MkdirAll(o.keep.data, 0o700); err != nil {
		return fmt.Errorf("--data %s: the folder cannot be made (%w): give one that this program may write", o.keep.data, plainPath(err))
	}
	return writable("--data", o.keep.data, o.keep.data, ".writable-")
}

// keepError words why the file of --keep cannot be used; alone says that there is no
// source, and the file must be there.
func (o *outboxOptions) keepError(err error, alone bool) error {
	var system *fs.PathError
	switch {
	case errors.Is(err, fs.ErrNotExist) && alone:
		return fmt.Errorf("--keep %s: there is no such file: what it held was sent, or the path is another one", o.keep)
	case errors.Is(err, fs.ErrNotExist):
		return fmt.Errorf("--keep %s: there is no folder %s: make it first", o.keep, filepath.Dir(o.keep))
	case errors.As(err, &system):
		return fmt.Errorf("--keep %s: %w: give a file that this program may write", o.keep, system.Err)
	}
	return fmt.Errorf("--keep: %s", strings.TrimPrefix(err.Error(), "outbox: "))
}
