package main

import (
	"context"
	"os"
	"os/signal"
	"syscall"
)

// untilSignal is a context that SIGINT and SIGTERM end; a second one ends the program
// at once.
func untilSignal() (ctx context.Context, stop func()) {
	ctx, stop = signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	context.AfterFunc(ctx, stop)
	return ctx, stop
}
