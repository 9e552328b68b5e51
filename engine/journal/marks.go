package journal

import (
	"encoding/binary"
	"hash/crc32"
	"os"
)

// marks is a file beside a broker's within this process: the number of the last
// pack of each partition that was said to be durable. It is written after each
// commit and not synced: it survives the end of the process, and after one of
// the power it is at most behind. What it knows and the journal has not is lost,
// which a broker that cuts off the damaged end of a file does not say.
//
// 16 bytes a partition, little endian: number, CRC-32C of it, 0.
type marks struct {
	f *os.File
	// found is what was there at the start; 0 where nothing was, or nonsense.
	found []uint64
}

const markBytes = 16

func openMarks(path string, partitions int) (*marks, error) {
	f, err := os.OpenFile(path, os.O_RDWR|os.O_CREATE, 0o600)
	if err != nil {
		return nil, err
	}
	m := &marks{f: f, found: make([]uint64, partitions)}
	b := make([]byte, markBytes*partitions)
	n, _ := f.ReadAt(b, 0) // a short one has fewer
	for i := range m.found {
		if at := b[i*markBytes:]; (i+1)*markBytes <= n && crc32.Checksum(at[:8], castagnoli) == binary.LittleEndian.Uint32(at[8:]) {
			m.found[i] = binary.LittleEndian.Uint64(at)
		}
	}
	return m, nil
}

// set writes a mark. One that cannot be written is missed at worst when
// something is lost.
func (m *marks) set(partition int, number uint64) {
	var b [markBytes]byte
	binary.LittleEndian.PutUint64(b[:], number)
	binary.LittleEndian.PutUint32(b[8:], crc32.Checksum(b[:8], castagnoli))
	_, _ = m.f.WriteAt(b[:], int64(partition*markBytes))
}

func (m *marks) close() { m.f.Close() }
