// Package heightfile reads height rasters from ESRI ASCII grids, SRTM .hgt
// tiles, GeoTIFF and netCDF classic files, and writes and opens compiled
// height maps.
//
// A compiled height map, RELIEF.heights.tif, is an ordinary GeoTIFF: float32,
// uncompressed strips in row order, so that it can be used where it lies in
// memory-mapped pages; voids are NaN. What GeoTIFF has no key for (vertical
// datum and sigma, source, licence, fingerprint, checksums) is in the XML of
// tag 42112, documented with GDAL's GeoTIFF driver; the licence is in the
// Copyright tag too.
//
// Rows, not tiles: four neighbouring samples at a million random places of
// 7201 × 7201 cost 13 ns a place in rows and 27 ns in tiles of 128 × 128 for a
// belief 4 km across (30 m apart), and the same, 0.3 µs, spread over the whole
// map, where memory decides.
package heightfile
