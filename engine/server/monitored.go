package server

import (
	"math"

	"google.golang.org/protobuf/proto"

	"leadline/engine/monitor"
	"leadline/engine/sensor"
	"leadline/engine/summary"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// alarmKinds are the API's words for a monitor's.
var alarmKinds = map[monitor.Kind]leadlinev1.AlarmKind{
	monitor.Spread:     leadlinev1.AlarmKind_ALARM_KIND_SPREAD,
	monitor.Bias:       leadlinev1.AlarmKind_ALARM_KIND_BIAS,
	monitor.Impossible: leadlinev1.AlarmKind_ALARM_KIND_IMPOSSIBLE,
	monitor.Isolated:   leadlinev1.AlarmKind_ALARM_KIND_ISOLATED,
}

// monitored adds what the monitor says.
func monitored(out *leadlinev1.Posterior, p *summary.Posterior) {
	for _, a := range p.Alarms {
		m := &leadlinev1.Alarm{
			Kind: alarmKinds[a.Kind], Sensor: a.Key.Sensor, MeasurementKind: a.Key.Kind, Post: a.Key.Part,
			Raised: wire.FromTime(sensor.Time(a.RaisedNS)), Since: wire.FromTime(sensor.Time(a.BeganNS)),
		}
		if !math.IsInf(a.Evidence, 0) {
			m.Evidence, m.Threshold = proto.Float64(a.Evidence), proto.Float64(a.Threshold)
		}
		out.Alarms = append(out.Alarms, m)
	}
	for _, c := range p.Sensors {
		out.Consistency = append(out.Consistency, &leadlinev1.Consistency{
			Sensor: c.Key.Sensor, MeasurementKind: c.Key.Kind, Post: c.Key.Part,
			Compared: uint64(c.Taken), ScoreMean: c.Mean, ScoreMeanSquare: c.MeanSquare, Isolated: c.Isolated,
		})
	}
}
