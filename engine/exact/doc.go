// Package exact turns values into bytes and back, every bit as it was: for what
// must go on in another process as if nothing had been.
//
// A Coder goes through a value in one direction or the other by one description,
// so that what is written and what is read cannot differ. Exported fields are
// found by reflection; a type with others describes itself (Coded). Nil and empty
// slices stay apart, and so do the two zeros and the NaNs.
//
// Bytes may be anybody's: what is read is bounded by how many there are, and a
// wrong length, kind or number is an error. Whether values make sense is for the
// reader to check.
package exact
