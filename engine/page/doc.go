// Package page is the page for those who look rather than read: who must be
// called next, where a vehicle may be, and how sure that is. It is made of
// TypeScript in src, and of the bundle in dist, which is committed, so that
// building the program needs nothing but Go. `make page` makes the bundle.
//
// The page calls the API of the server that it came from and nothing else: its
// content security policy forbids every other request, and every script that is
// not in the bundle.
package page
