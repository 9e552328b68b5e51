package main

import (
	"os"
	"path/filepath"
	"strings"
)

// programName is how the user can call this program again.
func programName() string {
	path, err := os.Executable()
	if err != nil || strings.Contains(filepath.ToSlash(path), "/go-build") {
		return "go run leadline/cmd/leadline" // in the checkout; go run's own file goes away
	}
	return shellWord(os.Args[0])
}

// shellWord quotes a word for a POSIX shell where it needs that.
func shellWord(s string) string {
	plain := func(r rune) bool {
		return r >= '0' && r <= '9' || r >= 'a' && r <= 'z' || r >= 'A' && r <= 'Z' || strings.ContainsRune("/._-=:,+%@", r)
	}
	if s != "" && strings.TrimFunc(s, plain) == "" && strings.IndexFunc(s, func(r rune) bool { return !plain(r) }) < 0 {
		return s
	}
	return "'" + strings.ReplaceAll(s, "'", `'\''`) + "'"
}

// wrap breaks a text into lines of at most some letters.
func wrap(text string, width int, indent string) string {
	var b strings.Builder
	used := 0
	for _, word := range strings.Fields(text) {
		n := len([]rune(word))
		switch {
		case used == 0:
		case used+1+n > width:
			b.WriteString("\n" + indent)
			used = 0
		default:
			b.WriteByte(' ')
			used++
		}
		b.WriteString(word)
		used += n
	}
	return b.String()
}
