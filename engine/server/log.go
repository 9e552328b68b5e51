package server

import (
	"log/slog"
	"maps"
	"slices"
	"time"

	"leadline/engine/summary"
	leadlinev1 "leadline/proto/leadline/v1"
)

// statusLogInterval is the least time between two lines about the status of
// one drive; a change that falls into it is told at its end, if it lasts.
const statusLogInterval = 10 * time.Second

// driveLog writes what the operator should know of one drive: a line an event.
// The owner's goroutine uses it.
type driveLog struct {
	*slog.Logger
	clock   func() time.Time
	streams int

	located   bool // has been once
	status    summary.Status
	seen      summary.Status // the last one, logged or not
	changes   int            // since the last line
	loggedAt  time.Time
	perReason map[leadlinev1.Reason]uint64
}

func newDriveLog(log *slog.Logger, clock func() time.Time, vehicle, drive string) driveLog {
	return driveLog{
		Logger: log.With("vehicle", vehicle, "drive", drive), clock: clock,
		perReason: map[leadlinev1.Reason]uint64{},
	}
}

// attached notes that a stream feeds the drive; the first one has opened it.
func (l *driveLog) attached(sequence uint64, takesOver bool) {
	if l.streams++; l.streams > 1 {
		l.Info("drive resumed", "after_batch", sequence, "takes_over", takesOver)
	}
}

// now notes the drive's latest posterior: when it is first located, and when
// its status changes.
func (l *driveLog) now(p *summary.Posterior) {
	if p.Status != l.seen {
		l.seen = p.Status
		l.changes++
	}
	if p.Status == l.status {
		return
	}
	now, first := l.clock(), p.Status == summary.Located && !l.located
	if !first && l.status != 0 && now.Sub(l.loggedAt) < statusLogInterval {
		return
	}
	switch {
	case first:
		l.located = true
		l.Info("first located", "drive_time", time.Unix(0, p.TimeNS).UTC(), "radius95_m", p.Radius95M)
	case l.status != 0:
		l.Info("status changed", "from", l.status.String(), "to", p.Status.String(), "changes", l.changes, "drive_time", time.Unix(0, p.TimeNS).UTC(), "radius95_m", p.Radius95M)
	}
	l.status, l.changes, l.loggedAt = p.Status, 0, now
}

// refused notes a refused measurement: the first of each reason with a line,
// all in the count.
func (l *driveLog) refused(r *leadlinev1.Refusal) {
	if l.perReason[r.GetReason()]++; l.perReason[r.GetReason()] == 1 {
		l.Warn("measurement refused: the first for this reason, others are counted",
			"reason", r.GetReason().String(), "sensor", r.GetSensor(), "number", r.GetNumber(), "drive_time", r.GetTime().AsTime(), "detail", r.GetDetail())
	}
}

// reasons are the counts of refused measurements, for a line.
func (l *driveLog) reasons() slog.Attr {
	var counts []any
	for _, r := range slices.Sorted(maps.Keys(l.perReason)) {
		counts = append(counts, slog.Uint64(r.String(), l.perReason[r]))
	}
	return slog.Group("refused_for", counts...)
}
