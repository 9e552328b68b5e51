package main

import (
	"slices"
	"strings"
)

// permitted are the licences, by SPDX name, that an Apache-2.0 program may be
// linked with and handed on. CC-BY-4.0 asks for attribution, which the page
// gives. FTL is the FreeType licence, where a module offers the choice between
// it and the GPL.
var permitted = []string{
	"Apache-2.0", "BSD-2-Clause", "BSD-3-Clause", "BSL-1.0", "CC-BY-4.0", "CC0-1.0", "FTL", "ISC", "MIT", "MPL-2.0",
	"Unlicense", "Zlib",
}

// marks are phrases that stand in one licence's text and no other's, white
// space and case aside. A file may hold several texts.
var marks = []struct{ name, phrase string }{
	{"Apache-2.0", "apache license version 2.0"},
	{"Apache-2.0", "licensed under the apache license, version 2.0"},
	{"MIT", "permission is hereby granted, free of charge, to any person obtaining a copy of this software and associated documentation files (the \"software\"), to deal in the software without restriction"},
	{"ISC", "permission to use, copy, modify, and/or distribute this software for any purpose with or without fee is hereby granted"},
	{"ISC", "permission to use, copy, modify, and distribute this software for any purpose with or without fee is hereby granted"},
	{"MPL-2.0", "mozilla public license version 2.0"},
	{"MPL-2.0", "mozilla public license, version 2.0"},
	{"BSL-1.0", "boost software license - version 1.0"},
	{"CC0-1.0", "cc0 1.0 universal"},
	{"Unlicense", "this is free and unencumbered software released into the public domain"},
	{"Zlib", "altered source versions must be plainly marked as such"},
	{"CC-BY-4.0", "creative commons attribution 4.0 international public license"},
	{"FTL", "your choice of exactly one of the following two licenses: * the freetype license"},
	{"AGPL", "gnu affero general public license version 3"},
	{"LGPL", "gnu lesser general public license"},
	{"GPL", "gnu general public license version"},
}

// classify returns the SPDX names of the licences whose texts it finds.
func classify(text string) []string {
	text = strings.Join(strings.Fields(strings.ToLower(text)), " ")
	var names []string
	for _, mark := range marks {
		if strings.Contains(text, mark.phrase) {
			names = append(names, mark.name)
		}
	}
	// The BSD family differs by the clause on names.
	if strings.Contains(text, "redistribution and use in source and binary forms, with or without modification, are permitted") {
		switch {
		case strings.Contains(text, "all advertising materials mentioning"):
			names = append(names, "BSD-4-Clause")
		case strings.Contains(text, "may be used to endorse or promote"):
			names = append(names, "BSD-3-Clause")
		default:
			names = append(names, "BSD-2-Clause")
		}
	}
	// The MPL's text speaks of the GNU licences without being one, and of the
	// FreeType choice the GPL is the half not taken.
	if slices.Contains(names, "MPL-2.0") || slices.Contains(names, "FTL") {
		names = slices.DeleteFunc(names, func(n string) bool { return strings.HasSuffix(n, "GPL") })
	}
	slices.Sort(names)
	return slices.Compact(names)
}
