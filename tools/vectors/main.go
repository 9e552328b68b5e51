//go:build ignore

// Command vectors writes engine/kernel's loops for amd64: instructions of AVX2,
// four values of float64 at a time. It has a modfile of its own (tools/avo.mod);
// see `make generate`.
//
// Each lane does what the plain Go beside it does, operation by operation and
// rounded each time, so that the bits are the same: products are not fused with
// sums, and no sum goes over lanes.
package main

import . "github.com/mmcloughlin/avo/build"

func main() {
	ConstraintExpr("amd64")
	spread()
	addScaled()
	combine()
	weighBy()
	combineRows()
	weighRows()
	widen()
	copyBlock()
	dropBelow()
	c := constants()
	weigh(c)
	logNormal(c)
	logAdd(c)
	logs(c)
	exps(c)
	normalSeries(c)
	normalFraction(c)
	beyond(c)
	samplePatch(c)
	sampleRow(c)
	likely(c)
	dense()
	count()
	roots()
	steps()
	scaleBy()
	blockMoments(c)
	ground(c)
	Generate()
}
