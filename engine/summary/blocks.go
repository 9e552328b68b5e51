package summary

// blocks number the nodes of a grid of which few are used, as those along roads:
// square blocks of nodes are made where one is asked for and found by a hash, so
// that most neighbours of a node are found by arithmetic. The zero value must be
// reset.
type blocks struct {
	slot []slot     // open addressing; a power of two long
	key  []uint64   // by block
	next [][9]int32 // by block: those around it, one more than their number; 0: not looked up, -1: none
	last int32      // the block asked for last
}

// slot holds a block by its key; block is one more than its number, 0 in a free
// slot.
type slot struct {
	key   uint64
	block int32
}

const (
	blockBits = 2
	blockSide = 1 << blockBits
	blockMask = blockSide - 1
)

func blockKey(col, row int32) uint64 { return uint64(uint32(col))<<32 | uint64(uint32(row)) }

func (b *blocks) reset() {
	b.key, b.next, b.last = b.key[:0], b.next[:0], -1
	// Small at first, so that clearing it costs a small belief nothing.
	b.slot = resize(b.slot, 64)
	clear(b.slot)
}

// nodes is how many there are.
func (b *blocks) nodes() int { return len(b.key) << (2 * blockBits) }

func inBlock(col, row int32) int32 { return (row&blockMask)<<blockBits | col&blockMask }

// node returns the node at a column and row, making its block if need be.
func (b *blocks) node(col, row int32) int32 {
	key := blockKey(col>>blockBits, row>>blockBits)
	if b.last < 0 || b.key[b.last] != key {
		b.last = b.find(key)
		if b.last < 0 {
			b.last = b.add(key)
		}
	}
	return b.last<<(2*blockBits) | inBlock(col, row)
}

// has returns the node at a column and row, -1 if there is none.
func (b *blocks) has(col, row int32) int32 {
	block := b.find(blockKey(col>>blockBits, row>>blockBits))
	if block < 0 {
		return -1
	}
	return block<<(2*blockBits) | inBlock(col, row)
}

// place is where a node is.
func (b *blocks) place(n int32) (col, row int32) {
	key := b.key[n>>(2*blockBits)]
	return int32(key>>32)<<blockBits | n&blockMask, int32(uint32(key))<<blockBits | n>>blockBits&blockMask
}

// beside returns the node by a step of at most one each way. Where its block is
// not there it is made, or -1 is returned; after that none may be made any more.
func (b *blocks) beside(n, east, north int32, make bool) int32 {
	col, row := n&blockMask+east, n>>blockBits&blockMask+north
	block := n >> (2 * blockBits)
	if uint32(col|row) >= blockSide { // negative or too large
		way := (row>>blockBits+1)*3 + col>>blockBits + 1
		next := b.next[block][way]
		if next == 0 {
			key := b.key[block]
			key = blockKey(int32(key>>32)+col>>blockBits, int32(uint32(key))+row>>blockBits)
			next = b.find(key)
			switch {
			case next >= 0:
				next++
			case make:
				next = b.add(key) + 1
			}
			b.next[block][way] = next
		}
		if next < 0 {
			return -1
		}
		block = next - 1
	}
	return block<<(2*blockBits) | inBlock(col, row)
}

// hashOf keeps the columns of a row side by side, so that looking at a block's
// neighbours stays within a few cache lines; rows are scattered by 2^32 over the
// golden ratio.
func hashOf(key uint64, mask int) int {
	return int(uint32(key)*0x9e3779b1+uint32(key>>32)) & mask
}

// find returns the block of a key, -1 if there is none.
func (b *blocks) find(key uint64) int32 {
	mask := len(b.slot) - 1
	for i := hashOf(key, mask); ; i = (i + 1) & mask {
		if s := &b.slot[i]; s.block == 0 || s.key == key {
			return s.block - 1
		}
	}
}

// add makes a block that there is not yet.
func (b *blocks) add(key uint64) int32 {
	b.key = append(b.key, key)
	b.next = append(b.next, [9]int32{})
	if 2*len(b.key) > len(b.slot) {
		b.slot = resize(b.slot, 4*len(b.slot))
		clear(b.slot)
		for n, key := range b.key[:len(b.key)-1] {
			b.put(key, int32(n))
		}
	}
	n := int32(len(b.key) - 1)
	b.put(key, n)
	return n
}

func (b *blocks) put(key uint64, n int32) {
	mask := len(b.slot) - 1
	i := hashOf(key, mask)
	for b.slot[i].block != 0 {
		i = (i + 1) & mask
	}
	b.slot[i] = slot{key, n + 1}
}
