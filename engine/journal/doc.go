// Package journal keeps records durable on NATS JetStream: in files of its own,
// by a broker within this process, or at a broker elsewhere.
//
// Records belong to lines, and each line counts its own from 1. Lines hash to
// partitions by a key; a partition is one subject and one committer, which
// packs all records that wait into one message and publishes it: one commit, and
// within this process one fsync, for all of them. A pack says which one it is,
// which writer's, and carries a checksum, so that what is missing is seen when
// the journal is read, and is told by line and number. The broker holds the
// partition's last sequence against each publishing: of two writers one has an
// error.
//
// What is kept of old records follows from a bound on the bytes; what a line
// still needs (Line.Keep) is kept in any case, and where that leaves no room new
// records are refused with ErrFull.
//
// The journal knows nothing of what records say.
package journal
