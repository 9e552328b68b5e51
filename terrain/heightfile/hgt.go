package heightfile

import (
	"encoding/binary"
	"fmt"
	"io"
	"path/filepath"
	"strconv"
	"strings"

	"leadline/terrain"
)

// srtmLE90M is the absolute vertical error of SRTM at 90 %, by its product
// specification.
const srtmLE90M = 16

// readHGT reads an SRTM tile: one degree square, named by its south-west
// corner, 1201 or 3601 rows of big-endian 16-bit metres from the north, -32768
// where there is none. Samples lie on the corners. Unless told otherwise the
// datum is EGM96 and the error 16 m LE90, as the product specification has it.
func readHGT(r io.ReaderAt, size int64, name string, opt Options) (*raw, error) {
	base := strings.ToUpper(filepath.Base(name))
	lat, lon, ok := hgtCorner(base)
	if !ok {
		return nil, fmt.Errorf("the name does not give the tile's south-west corner: call it like N10W062.hgt")
	}
	var n int
	switch size {
	case 1201 * 1201 * 2:
		n = 1201
	case 3601 * 3601 * 2:
		n = 3601
	default:
		return nil, fmt.Errorf("it has %d bytes; an SRTM tile has 2 × 1201² = 2884802 (3 arc seconds) or 2 × 3601² = 25934402 (1 arc second): is it cut short or compressed?", size)
	}
	if err := opt.room(int64(n), int64(n)); err != nil {
		return nil, err
	}
	f := &raw{values: make([]float32, n*n), unit: Metre, vertical: Up}
	f.meta.VerticalDatum, f.meta.SigmaM = "EGM96", terrain.SigmaFromLE90(srtmLE90M)
	step := 1 / float64(n-1)
	f.grid = terrain.Grid{CRS: terrain.LonLat(), Cols: n, Rows: n, FirstX: float64(lon), FirstY: float64(lat + 1), StepX: step, StepY: -step}
	row := make([]byte, 2*n)
	for i := range n {
		if _, err := r.ReadAt(row, int64(i*len(row))); err != nil && err != io.EOF {
			return nil, fmt.Errorf("row %d: %w", i, err)
		}
		for c := range n {
			v := int16(binary.BigEndian.Uint16(row[2*c:]))
			f.values[i*n+c] = float32(v)
			if v == -32768 {
				f.values[i*n+c] = float32(nan)
			}
		}
	}
	return f, nil
}

// hgtCorner parses N10W062 at the start of a name in capitals.
func hgtCorner(s string) (lat, lon int, ok bool) {
	if len(s) < 7 || (s[0] != 'N' && s[0] != 'S') || (s[3] != 'W' && s[3] != 'E') || strings.ContainsAny(s[1:7], "+-_") {
		return 0, 0, false
	}
	lat, err1 := strconv.Atoi(s[1:3])
	lon, err2 := strconv.Atoi(s[4:7])
	if s[0] == 'S' {
		lat = -lat
	}
	if s[3] == 'W' {
		lon = -lon
	}
	return lat, lon, err1 == nil && err2 == nil && lat >= -90 && lat < 90 && lon >= -180 && lon < 180
}
