package main

import (
	"bufio"
	"bytes"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"

	"leadline/engine/drivefile"
	"leadline/network/roadfile"
	"leadline/terrain/heightfile"
)

// driveHeader reads a drive's header, and how long the file is.
func driveHeader(path string) (drivefile.Header, int64, error) {
	f, b, err := openDrive(path)
	if err != nil {
		return drivefile.Header{}, 0, err
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return drivefile.Header{}, 0, err
	}
	rec, err := drivefile.NewReader(b, path).Read()
	if err != nil {
		return drivefile.Header{}, 0, err
	}
	return *rec.Header, info.Size(), nil
}

// vehicles refuses the traffic of a road, which has no one vehicle to position.
func vehicles(h drivefile.Header, path string) error {
	if h.Traffic {
		return fmt.Errorf("%s is the traffic of a road, and of no one vehicle: follow it with `leadline traffic %s`", path, path)
	}
	return nil
}

// roads refuses the drive of a vehicle.
func roads(h drivefile.Header, path string) error {
	if !h.Traffic && (h.Map != "" || h.Start.SigmaM > 0 || len(h.Start.Area) > 0) {
		return fmt.Errorf("%s is the drive of a vehicle, and no road's traffic: run it with `leadline replay %s`", path, path)
	}
	return nil
}

// openDrive opens a drive file.
func openDrive(path string) (*os.File, *bufio.Reader, error) {
	f, err := os.Open(path)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, nil, fmt.Errorf("there is no drive file %s: check the path", path)
	}
	if err != nil {
		return nil, nil, err
	}
	if info, err := f.Stat(); err == nil && info.IsDir() {
		f.Close()
		return nil, nil, fmt.Errorf("%s is a folder: give a drive file, such as %s", path, filepath.Join(path, "NAME"+drivefile.Suffix))
	}
	b := bufio.NewReader(f)
	if err := startsAsDrive(b, path); err != nil {
		f.Close()
		return nil, nil, err
	}
	return f, b, nil
}

// readDrive reads a drive file whole.
func readDrive(path string) (*drivefile.Drive, error) {
	f, b, err := openDrive(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	return drivefile.ReadAll(b, path)
}

// startsAsDrive tells logs of other kinds from drive files, whose lines begin
// with a brace.
func startsAsDrive(b *bufio.Reader, path string) error {
	head, err := b.Peek(512)
	if err != nil && !errors.Is(err, io.EOF) {
		return fmt.Errorf("%s: %w", path, err)
	}
	head = bytes.TrimLeft(head, " \t\r\n\ufeff")
	if strings.HasSuffix(path, drivefile.Suffix) || len(head) == 0 || head[0] == '{' {
		return nil
	}
	how := "--columns COLUMNS.yaml "
	if head[0] == '$' || head[0] == '!' || head[0] == '\\' {
		how = ""
	}
	return fmt.Errorf("%s is no drive file: make one of a log with `leadline import %s %s-o %s%s --vehicle NAME`", path, path, how, driveName(path), drivefile.Suffix)
}

// driveName is a drive file's name without folder and suffix.
func driveName(path string) string {
	name := filepath.Base(path)
	if n, ok := strings.CutSuffix(name, drivefile.Suffix); ok && n != "" {
		return n
	}
	return strings.TrimSuffix(name, filepath.Ext(name))
}

// headerMap finds the map that a drive's header names, in the drive's folder.
func headerMap(name, drivePath string) (string, error) {
	if name == "" {
		return "", fmt.Errorf("%s: its header names no map: give one with --map", drivePath)
	}
	if path, ok := beside(drivePath, name, "", roadfile.Suffix, heightfile.Suffix); ok {
		return path, nil
	}
	return "", fmt.Errorf("%s: the map %q that its header names is not beside the drive: give the file with --map", drivePath, name)
}
