// Package terrain holds height rasters: land or sea-floor heights on a
// regular grid of longitude and latitude, or of a transverse Mercator
// projection, sampled as a geo.Field in a local metric frame.
//
// A raster is immutable once made and may be read by many goroutines. Heights
// are metres, up, above the vertical datum that the raster names or calls
// "unstated". Files are read and written by package heightfile.
package terrain
