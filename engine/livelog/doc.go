// Package livelog brings the lines of instruments as they come: from a serial
// port, a TCP server or UDP datagrams.
//
//	s, err := livelog.Parse("serial:/dev/ttyUSB0?baud=4800")
//	stream, err := s.Open(ctx, livelog.Options{})
//	for line := range stream.Lines() { … } // until ctx ends
//
// What is in the lines is for others to know. A serial port or a connection
// that is lost is opened again, with longer and longer waits; only the first
// opening must succeed, so that a wrong name is told at once. Every line has a
// bound, and garbage is passed on as lines.
package livelog
