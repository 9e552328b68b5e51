// Package kernel holds every transcendental function that a posterior depends
// on.
//
// The standard library's Exp and its relatives choose an implementation by
// CPU (fused multiply-add or not), so the same drive could give different
// bits on two machines. The functions here use only additions,
// multiplications, divisions and square roots, each rounded once: a product
// that feeds a sum is converted to float64 explicitly, which the Go
// specification forbids to fuse. The same arguments therefore give the same
// bits on every machine of an architecture.
//
// Accuracy is tested against package math: a few units in the last place,
// stated on each function.
package kernel
