package main

import (
	"fmt"
	"io"
	"os"

	"leadline/cmd/leadline/settings"
)

// readConfig reads a file of settings.
func readConfig(path string, keys []string) (map[string]settings.Value, error) {
	if err := exists(path); err != nil {
		return nil, fmt.Errorf("settings: %w", err)
	}
	f, err := os.Open(path)
	if err != nil {
		return nil, fmt.Errorf("settings: %w", err)
	}
	defer f.Close()
	text, err := io.ReadAll(io.LimitReader(f, settings.MaxBytes+1))
	if err != nil {
		return nil, fmt.Errorf("settings: %w", err)
	}
	return settings.Parse(path, text, keys)
}
