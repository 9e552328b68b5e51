package main

import (
	"bytes"
	"encoding/json"
	"fmt"
	"io"
	"strings"
	"time"

	"google.golang.org/protobuf/encoding/protojson"
	"google.golang.org/protobuf/proto"

	"leadline/engine/session"
	leadlinev1 "leadline/proto/leadline/v1"
)

// printMessage prints a message of the API as JSON with its field names.
func printMessage(w io.Writer, m proto.Message) error {
	b, err := protojson.MarshalOptions{UseProtoNames: true, EmitUnpopulated: true}.Marshal(m)
	if err != nil {
		return err
	}
	// Its spacing is varied on purpose: Indent evens it out.
	var out bytes.Buffer
	if err := json.Indent(&out, b, "", "  "); err != nil {
		return err
	}
	out.WriteByte('\n')
	_, err = out.WriteTo(w)
	return err
}

// printPosterior prints what a person wants to know of a posterior: first what
// warns of the figures after it, the lines of first among that.
func printPosterior(w io.Writer, p *leadlinev1.Posterior, first ...string) {
	if p == nil {
		fmt.Fprintln(w, "no posterior")
		return
	}
	line := func(label, format string, args ...any) {
		fmt.Fprintf(w, "  %-14s %s\n", label, fmt.Sprintf(format, args...))
	}
	fmt.Fprintf(w, "%s is %s at %s (%s)\n", oneLine(p.GetVehicle()), words(p.GetStatus().String(), "STATUS_"), p.GetTime().AsTime().Format(time.RFC3339Nano), age(p.GetAgeS()))
	for _, text := range first {
		fmt.Fprintf(w, "  %s\n", text)
	}
	if isLost(p) {
		line("lost", "%.1f %%: no figure below holds then", 100*p.GetLost())
	}
	for _, a := range p.GetAlarms() {
		line("alarm", "%s", alarmText(a))
	}
	if p.GetStatus() == leadlinev1.Status_STATUS_CONTRADICTED && len(p.GetAlarms()) == 0 {
		line("contradicted", "the measurements do not fit the figures below")
	}
	r := p.GetRadii()
	line("mean", "lon %.6f, lat %.6f; 50 %% within %.1f m, 95 %% within %.1f m, 99 %% within %.1f m",
		p.GetMean().GetLon(), p.GetMean().GetLat(), r.GetRadius50M(), r.GetRadius95M(), r.GetRadius99M())
	if q := p.GetProtection(); q.RadiusM != nil {
		line("protection", "%.1f m at a risk of %.1g", q.GetRadiusM(), q.GetRisk())
	} else {
		line("protection", "unbounded at a risk of %.1g: %s", q.GetRisk(), q.GetUnboundedReason())
	}
	if p.GetOffMap() >= 0.01 {
		line("off the map", "%.1f %%", 100*p.GetOffMap())
	}
	best := p.GetMostProbable()
	line("most probable", "lon %.6f, lat %.6f", best.GetPosition().GetLon(), best.GetPosition().GetLat())
	for i, e := range p.GetEdges() {
		if i == 3 || e.GetProbability() < 0.01 {
			break
		}
		name := e.GetName()
		if name == "" {
			name = "unnamed road"
		}
		line("road", "%.1f %% %s (edge %d)", 100*e.GetProbability(), name, e.GetEdge())
	}
	for i, m := range p.GetModes() {
		if i == 3 || len(p.GetModes()) == 1 || m.GetMass() < 0.0005 { // 0.0 %
			break
		}
		line("mode", "%.1f %% around lon %.6f, lat %.6f", 100*m.GetMass(), m.GetMean().GetLon(), m.GetMean().GetLat())
	}
	if h := p.GetHeading(); h != nil {
		line("heading", "%.0f° ± %.0f°", h.GetDeg(), h.GetSigmaDeg())
	}
	if s := p.GetSpeed(); s != nil {
		line("speed", "%.1f m/s", s.GetMps())
	}
	for _, n := range p.GetNuisances() {
		line("estimated", "%s", strings.TrimSpace(fmt.Sprintf("%s %.5g ± %.2g %s", n.GetName(), n.GetMean(), n.GetSigma(), n.GetUnit())))
	}
	n := p.GetCounts()
	line("measurements", "%d accepted, %d refused; log evidence %.1f", n.GetAccepted(), n.GetRefused(), p.GetLogEvidence())
	if p.GetGapS() > 0 {
		line("gap", "nothing measured the motion for %.1f s", p.GetGapS())
	}
}

// isLost reports whether being lost is to be told of.
func isLost(p *leadlinev1.Posterior) bool { return p.GetLost() >= 0.01 || p.GetLostAlarm() }

// alarmText words an alarm.
func alarmText(a *leadlinev1.Alarm) string {
	who := "all measurements together"
	if a.GetSensor() != "" {
		who = a.GetSensor()
		if a.GetPost() != "" {
			who += " at " + a.GetPost()
		}
		who += " (" + a.GetMeasurementKind() + ")"
	}
	what := map[leadlinev1.AlarmKind]string{
		leadlinev1.AlarmKind_ALARM_KIND_SPREAD:     "err more than stated",
		leadlinev1.AlarmKind_ALARM_KIND_BIAS:       "err to one side",
		leadlinev1.AlarmKind_ALARM_KIND_IMPOSSIBLE: "sent what is impossible everywhere",
		leadlinev1.AlarmKind_ALARM_KIND_ISOLATED:   "isolated: tried, and not used until they agree again",
	}[a.GetKind()]
	text := fmt.Sprintf("%s: %s, since %s", who, what, a.GetSince().AsTime().Format(time.RFC3339))
	if a.Evidence != nil {
		text += fmt.Sprintf(" (%.1f nats)", a.GetEvidence())
	}
	return text
}

// age words how old an answer is, by the server's clock.
func age(s float64) string {
	if s < 0 {
		return span(-s) + " ahead of the server's clock"
	}
	return span(s) + " ago"
}

// span words a time that has passed.
func span(s float64) string {
	const day, year = 86400, 365.25 * 86400
	switch {
	case s < 120:
		return fmt.Sprintf("%.1f s", s)
	case s < 2*3600:
		return fmt.Sprintf("%.0f minutes", s/60)
	case s < 2*day:
		return fmt.Sprintf("%.0f hours", s/3600)
	case s < 2*year:
		return fmt.Sprintf("%.0f days", s/day)
	}
	return fmt.Sprintf("%.1f years", s/year)
}

// count is a number of things.
func count(n int, what string) string {
	if n == 1 {
		return "1 " + what
	}
	return fmt.Sprintf("%d %ss", n, what)
}

func durability(p *leadlinev1.Posterior) string {
	if p.GetDurable() {
		return "durable"
	}
	return "not durable: a restart of the server forgets it"
}

// words turns a name of an enumeration into words.
func words(name, prefix string) string {
	return strings.ReplaceAll(strings.ToLower(strings.TrimPrefix(name, prefix)), "_", " ")
}

// reasonText is a refusal's reason in the session's words.
func reasonText(r leadlinev1.Reason) session.Reason {
	return session.Reason(words(r.String(), "REASON_"))
}

// reasonName is a reason as errors of the API have it.
func reasonName(r leadlinev1.Reason) string { return strings.TrimPrefix(r.String(), "REASON_") }
