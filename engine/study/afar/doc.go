// Package afar has the runs of a sweep done on other machines, by way of a broker
// (NATS JetStream, the journal's).
//
// A sweep opens a Queue: it announces its job, stores maps and drives at the broker
// under what sums them up, and publishes each run as a message. Workers (Work) see
// the job, take a message each, fetch what the run reads, run it, store its folder
// and say that it is done. A message is the worker's for as long as it gives a sign
// of life; after that another worker gets it. Runs depend on drive, map, suite and
// setting alone, so that it does not matter who does one, nor whether two do: the
// queue takes the first answer and drops others.
//
// Only the same program, on the same kind of processor, computes the same bits. A
// worker that is of another one, or whose map is another, is refused.
package afar
