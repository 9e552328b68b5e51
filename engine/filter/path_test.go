package filter

import (
	"math"
	"math/rand/v2"
	"testing"
)

// TestBestTileByTile: what followSpread does tile by tile is what looking at every
// tap of every cell gives, across the borders of tiles and in any direction.
func TestBestTileByTile(t *testing.T) {
	const seed = 91
	rng := rand.New(rand.NewPCG(seed, 0))
	for _, d := range [][2]int32{{1, 0}, {0, 1}, {2, -1}} {
		var b Belief
		b.Dim, b.Lattice.SpacingM = 2, 1
		b.Tiles.At = []TileAt{{-1, 0}, {0, 0}, {1, 1}}
		for range 3 * tileCells {
			m := rng.Float64()
			if rng.IntN(3) == 0 {
				m = 0
			}
			b.Tiles.Mass = append(b.Tiles.Mass, m)
		}
		var w Workspace
		var tape Tape
		w.Record(&tape, &b)
		u := w.turn(&b, spreadOut)
		u.spread = taps{d[0], d[1], discreteNormal(nil, 0.8)}
		w.tiles.taps = u.spread
		b.spread(&w.tiles)
		w.endTiles(u, &b)
		best := logs(u.tiles.Mass)
		out := u.follow(best)
		for i, at := range u.then.At {
			for x := range u.then.tile(i) {
				col, row := at.Col*TileSide+int32(x%TileSide), at.Row*TileSide+int32(x/TileSide)
				if _, want := u.bestCell(best, col, row); out[i*tileCells+x] != want && !(math.IsInf(want, -1) && math.IsInf(out[i*tileCells+x], -1)) {
					t.Fatalf("seed %d, direction %v: cell (%d, %d) has %v, want %v", seed, d, col, row, out[i*tileCells+x], want)
				}
			}
		}
	}
}
