package main

import (
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

func TestPageAgreesWithGoMod(t *testing.T) {
	if err := compare("../../go.mod", "../../"+page); err != nil {
		t.Error(err)
	}
}

func TestCompareFindsEachDifference(t *testing.T) {
	dir := t.TempDir()
	file := func(name, text string) string {
		path := filepath.Join(dir, name)
		if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
		return path
	}
	mod := file("go.mod", "module m\n\ngo 1.26\n\nrequire (\n\texample.org/a v1.0.0\n\texample.org/b v1.2.0 // indirect\n)\n")
	const a, b = "| example.org/a | v1.0.0 | direct | MIT |  |\n", "| example.org/b | v1.2.0 | indirect | MIT | NOTICE |\n"
	for name, c := range map[string]struct{ rows, says string }{
		"agrees":        {a + b, ""},
		"one missing":   {a, "lacks example.org/b v1.2.0 indirect"},
		"one too many":  {a + b + "| example.org/c | v1.0.0 | direct | MIT |  |\n", "lists example.org/c"},
		"older version": {a + strings.Replace(b, "v1.2.0", "v1.1.0", 1), "lacks example.org/b v1.2.0"},
		"wrong kind":    {a + strings.Replace(b, "indirect", "direct", 1), "lacks example.org/b v1.2.0 indirect"},
	} {
		err := compare(mod, file("page.md", "| module | version | required | licence | notice file |\n|---|---|---|---|---|\n"+c.rows))
		if c.says == "" && err != nil || c.says != "" && (err == nil || !strings.Contains(err.Error(), c.says)) {
			t.Errorf("%s: got %v, want %q", name, err, c.says)
		}
	}
}

func TestClassify(t *testing.T) {
	ours, err := os.ReadFile("../../LICENSE")
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		name, text string
		want       []string
	}{
		{"our own licence", string(ours), []string{"Apache-2.0"}},
		{
			"three clauses", "Redistribution and use in source and binary forms, with or without\nmodification, are permitted provided" +
				" that ... Neither the name of\nX nor the names of its contributors may be used to endorse or promote products", []string{"BSD-3-Clause"},
		},
		{"two texts in one file", "Apache License\n Version 2.0, January 2004 ... ISC License: Permission to use, copy, modify, and/or distribute this software for any purpose with or without fee is hereby granted", []string{"Apache-2.0", "ISC"}},
		{"two clauses", "Redistribution and use in source and binary forms,\n with or without modification, are permitted provided", []string{"BSD-2-Clause"}},
		{"a choice", "is subject to your choice of exactly one of\nthe following two licenses:\n  * The FreeType License, which is similar\n  * The GNU General Public License (GPL), version 2", []string{"FTL"}},
		{"lesser", "GNU LESSER GENERAL PUBLIC LICENSE\nVersion 3", []string{"LGPL"}},
		{"none", "All rights reserved.", nil},
	} {
		if got := classify(c.text); !slices.Equal(got, c.want) {
			t.Errorf("%s: got %v, want %v", c.name, got, c.want)
		}
	}
}
