package summary

import (
	"crypto/sha256"
	"encoding"
	"encoding/binary"
	"encoding/hex"
	"fmt"
	"hash"
	"math"

	"leadline/engine/exact"
)

var _ exact.Coded = (*Hasher)(nil)

// Hasher sums up final posteriors in event order: SHA-256 over, for each,
// little-endian
//
//	int64   time in nanoseconds
//	uint64  status, by its number
//	float64 mean east, mean north               in frame metres
//	float64 covariance EE, EN, NN               in frame metres
//	float64 running log evidence
//
// The frame's figures are taken rather than longitude and latitude, because
// they are what the filter computed. Negative zero counts as zero. Use
// NewHasher.
type Hasher struct {
	h   hash.Hash
	buf [64]byte
}

// NewHasher returns a Hasher of no posteriors.
func NewHasher() *Hasher { return &Hasher{h: sha256.New()} }

// Add appends a posterior.
func (h *Hasher) Add(p *Posterior) {
	le := binary.LittleEndian
	le.PutUint64(h.buf[0:], uint64(p.TimeNS))
	le.PutUint64(h.buf[8:], uint64(p.Status))
	for i, v := range [...]float64{
		p.MeanFrame.E, p.MeanFrame.N,
		p.CovFrame.EE, p.CovFrame.EN, p.CovFrame.NN, p.LogEvidence,
	} {
		le.PutUint64(h.buf[16+8*i:], math.Float64bits(v+0)) // -0 + 0 = +0
	}
	h.h.Write(h.buf[:])
}

// Sum returns the hash so far in hexadecimal; more may be added after it.
func (h *Hasher) Sum() string { return hex.EncodeToString(h.h.Sum(nil)) }

// Code goes through the hasher, for exact copies.
func (h *Hasher) Code(c *exact.Coder) {
	var state []byte
	if !c.Reading() {
		var err error
		if state, err = h.h.(encoding.BinaryMarshaler).MarshalBinary(); err != nil {
			panic("summary: " + err.Error()) // a SHA-256 always can
		}
	}
	c.Raw(&state)
	if !c.Reading() || c.Err() != nil {
		return
	}
	h.h = sha256.New()
	if err := h.h.(encoding.BinaryUnmarshaler).UnmarshalBinary(state); err != nil {
		c.Fail(fmt.Errorf("hash: %w", err))
	}
}
