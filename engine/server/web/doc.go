// Package web answers programs and browsers that speak HTTP/1.1, on the port
// where vehicles speak gRPC: Connect, gRPC-Web, and plain JSON.
//
// Split parts a listener's connections by their first bytes. Those that begin
// with HTTP/2's preface are gRPC's own, and lose nothing by it; Server answers
// the others. It is handed the same services as a grpc.Server and runs the same
// handlers and interceptors, so that limits, reasons and versions are the same.
// Calls in which the client sends a stream need gRPC.
package web
