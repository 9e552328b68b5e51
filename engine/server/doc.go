// Package server is the gRPC adapter around sessions: conversion, limits and
// ownership. What a vehicle's posterior is, engine/session says; the server
// adds a clock, and answers many vehicles at once.
//
// One goroutine, an owner, owns each session and is the only one to touch it.
// A stream hands its batches to the owner through a queue of its own and takes
// the replies from another; both are bounded, so that a fast sender waits and
// a slow reader holds up nobody but its own vehicle. An owner outlives its
// streams: when one breaks, the vehicle opens its drive again and goes on
// after the last batch that was acknowledged; a stream that is opened takes
// over from the one before, which may be half open.
//
// A hub passes what owners release on to those who follow. Each follower has a
// slot for each vehicle, of bounded size; an owner fills it and never waits.
// What takes time, a region or a belief's picture, an owner adds when some
// follower is about to be told, once for all who ask the same.
//
// An atlas counts the sessions of each map. One that is replaced goes on under
// the drives that are on it, and is closed when the last one leaves.
//
// With a journal (engine/journal) what comes of a drive is durable before its
// session sees it, and a server that starts goes on with the drives that the
// journal holds: see recorder.go and recover.go. Without one replies say that
// nothing is durable.
package server
