// Package score holds the statistics by which runs are compared with truth:
// consistency bounds, accuracy bounds and intervals.
package score
