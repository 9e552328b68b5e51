// Package share decides which of several servers has which partition of a journal,
// and tells each of them who has the others.
//
// A server is alive as long as its key at the broker (JetStream key-value) changes
// each second; by its own clock, each of the others sees when it last did. A
// partition's key names its server. Whoever wants to have one writes that key over
// the revision that it knows, so that of two one has an error; and it takes what a
// dead server had. A key says who should write. That nobody else does, the journal
// sees to: its packs are refused once another server has written there.
//
// Each server has as many partitions as any other, give or take one: who has more
// gives some, who has less takes what is free.
package share
