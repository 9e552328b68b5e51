// Package report makes one page of results: a file of HTML that holds all it
// shows, needs no network and no script, and can be printed.
//
// A run is shown by its figures, a map, its errors and radii over time, its errors
// against its protection radii, where the truth fell in its posteriors, and how
// measurements fell in what was expected of them. Runs of any length take the
// same room: what is drawn is gathered while the table of posteriors is read, and
// keeps the worst of what it joins.
package report
