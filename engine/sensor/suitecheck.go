package sensor

import (
	"errors"
	"fmt"
	"slices"
	"strings"

	"leadline/engine/geo"
)

// Validate lists everything wrong with a suite in one error.
func (s *Suite) Validate() error {
	found := s.problems()
	if len(found) == 0 {
		return nil
	}
	all := make([]string, len(found))
	for i, f := range found {
		all[i] = f.String()
	}
	return errors.New("suite: " + strings.Join(all, "; "))
}

type findings []Finding

func (f *findings) add(path, format string, args ...any) {
	*f = append(*f, Finding{path, fmt.Sprintf(format, args...)})
}

// within reports a figure outside [lo, hi]; NaN is.
func (f *findings) within(path string, v, lo, hi float64) {
	if !(v >= lo && v <= hi) {
		f.add(path, "%v must be a number from %v to %v", v, lo, hi)
	}
}

// unless0 is within for figures where 0 means the default.
func (f *findings) unless0(path string, v, lo, hi float64) {
	if v != 0 {
		f.within(path, v, lo, hi)
	}
}

func (f *findings) id(path, id string, seen map[string]bool) {
	switch {
	case id == "":
		f.add(path, "it needs a name")
	case len(id) > maxName:
		f.add(path, "the name has %d bytes: at most %d are allowed", len(id), maxName)
	case seen[id]:
		f.add(path, "%q is there twice", id)
	}
	seen[id] = true
}

func (s *Suite) problems() []Finding {
	var f findings
	v := s.Vehicle
	f.unless0("vehicle.alert_limit_m", v.AlertLimitM, 0.01, 1e6)
	f.unless0("vehicle.integrity_risk", v.IntegrityRisk, 1e-12, 0.01)
	f.unless0("vehicle.false_alarm_h", v.FalseAlarmH, 0.01, 1e5)
	f.unless0("vehicle.late_window_s", v.LateWindowS, 1e-3, 3600)
	f.unless0("vehicle.look_back_s", v.LookBackS, 1e-3, 3600)
	f.unless0("vehicle.hold_s", v.HoldS, 1e-3, 3600)
	f.unless0("vehicle.lateral_sigma_m", v.LateralSigmaM, 1e-3, 100)
	f.unless0("vehicle.stretch_m_per_sqrt_m", v.StretchMPerSqrtM, 1e-6, 100)
	f.unless0("vehicle.corner_sigma_m", v.CornerSigmaM, 1e-6, 100)
	f.within("vehicle.keeps_right_m", v.KeepsRightM, -20, 20)
	f.unless0("vehicle.max_speed_mps", v.MaxSpeedMPS, 0.01, 1e4)
	f.unless0("vehicle.max_accel_mps2", v.MaxAccelMPS2, 1e-3, 1e3)
	f.unless0("vehicle.max_turn_dps", v.MaxTurnDPS, 1e-3, 1e4)
	f.unless0("vehicle.velocity_drift_mps_per_sqrt_s", v.VelocityDriftMPSPerSqrtS, 1e-4, 1e3)
	f.unless0("vehicle.velocity_sigma_mps", v.VelocitySigmaMPS, 1e-3, 1e4)
	if !v.HasVelocity() && (v.VelocitySigmaMPS != 0 || v.VelocityGrid) {
		f.add("vehicle.velocity_drift_mps_per_sqrt_s", "velocity_sigma_mps and velocity_grid mean nothing without it: say by how much the velocity changes in a second")
	}
	if v.VelocityGrid && len(s.Quantities(2)) > 4 {
		f.add("vehicle.velocity_grid", "a grid with velocity axes has no room for a heading or a nuisance: leave out velocity_grid, or %s", s.Quantities(2)[4].Name)
	}
	f.within("vehicle.lowest_m", v.LowestM, -20000, 20000)
	f.within("vehicle.highest_m", v.HighestM, -20000, 20000)
	if (v.LowestM != 0 || v.HighestM != 0) && !(v.HighestM-v.LowestM >= 1) {
		f.add("vehicle.highest_m", "it must be at least 1 m above lowest_m")
	}
	for _, r := range []struct {
		path string
		rate *float64
	}{
		{"off_map_per_m", v.OffMapPerM},
		{"on_map_per_m", v.OnMapPerM},
		{"lost_per_s", v.LostPerS},
		{"moved_per_s", v.MovedPerS},
	} {
		if r.rate != nil {
			f.within("vehicle."+r.path, *r.rate, 0, 1)
		}
	}
	if t := s.Environment.AirTemperatureC; t != nil {
		f.within("environment.air_temperature_c", *t, -90, 60)
	}
	f.unless0("environment.sea_level_pressure_hpa", s.Environment.SeaLevelPressureHPa, 800, 1200)
	f.unless0("environment.map_error_length_m", s.Environment.MapErrorLengthM, 0.1, 1e5)
	if len(s.Sensors) > maxSensors {
		f.add("sensors", "%d sensors: at most %d are allowed", len(s.Sensors), maxSensors)
		return f
	}
	seen := map[string]bool{}
	nuisances := map[string]string{}
	for i, d := range s.Sensors {
		path := fmt.Sprintf("sensors[%d]", i)
		f.id(path+".name", d.Name, seen)
		f.sensor(path, d)
		for j, n := range d.Nuisances {
			where := nuisancePath(i, j)
			if by, twice := nuisances[n.Name]; twice {
				f.add(where+".name", "%s is already described at sensor %q: a vehicle has one", n.Name, by)
			}
			nuisances[n.Name] = d.Name
			f.nuisance(where, n, d, s)
		}
	}
	f.tooMany(s)
	if len(s.Beacons) > maxPlaces || len(s.Posts) > maxPlaces {
		f.add("beacons", "at most %d beacons and posts each are allowed", maxPlaces)
		return f
	}
	seen = map[string]bool{}
	for i, b := range s.Beacons {
		path := fmt.Sprintf("beacons[%d]", i)
		f.id(path+".id", b.ID, seen)
		f.place(path, b.LonDeg, b.LatDeg, b.HeightM)
	}
	seen = map[string]bool{}
	for i, p := range s.Posts {
		path := fmt.Sprintf("posts[%d]", i)
		f.id(path+".id", p.ID, seen)
		f.place(path, p.LonDeg, p.LatDeg, p.HeightM)
		if p.AxisDeg != nil {
			f.within(path+".axis_deg", *p.AxisDeg, -360, 360)
		}
		f.unless0(path+".spacing_m", p.SpacingM, 1e-3, 1e3)
		f.unless0(path+".delay_sigma_s", p.DelaySigmaS, 1e-9, 1)
		f.unless0(path+".sigma_deg", p.SigmaDeg, 1e-3, 180)
		if (p.SpacingM == 0) != (p.DelaySigmaS == 0) {
			f.add(path, "spacing_m and delay_sigma_s go together")
		}
	}
	f.traffic(s.Traffic)
	return f
}

func nuisancePath(sensor, i int) string {
	return fmt.Sprintf("sensors[%d].nuisances[%d]", sensor, i)
}

func (f *findings) sensor(path string, d Sensor) {
	if !slices.Contains(Kinds(), d.Kind) {
		f.add(path+".kind", "%q is no kind of measurement: the kinds are %s", d.Kind, strings.Join(Kinds(), ", "))
	}
	if d.Course && d.Kind != KindSpeed {
		f.add(path+".course", "only a speed has a course")
	}
	for _, x := range []struct {
		name string
		v    float64
	}{{"forward_m", d.Mounting.ForwardM}, {"right_m", d.Mounting.RightM}, {"down_m", d.Mounting.DownM}} {
		f.within(path+".mounting."+x.name, x.v, -1000, 1000)
	}
	f.within(path+".time_offset_s", d.TimeOffsetS, -3600, 3600)
	if d.Sign < -1 || d.Sign > 1 {
		f.add(path+".sign", "%d must be 1 or -1", d.Sign)
	}
	n := path + ".noise."
	f.unless0(n+"sigma_m", d.Noise.SigmaM, minSigmaM, maxSigmaM)
	f.unless0(n+"sigma_deg", d.Noise.SigmaDeg, minSigmaDeg, maxSigmaDeg)
	f.unless0(n+"sigma_mps", d.Noise.SigmaMPS, minSigmaMPS, maxSpeedMPS)
	f.unless0(n+"sigma_m_per_sqrt_m", d.Noise.SigmaMPerSqrtM, minSigmaM, 1e3)
	f.unless0(n+"sigma_deg_per_sqrt_s", d.Noise.DegPerSqrtS, minSigmaDeg, 1e3)
	if d.OutlierProbability != nil {
		f.within(path+".outlier_probability", *d.OutlierProbability, 0, 0.9)
	}
	f.within(path+".heavy_probability", d.HeavyProbability, 0, 0.5)
	if d.HeavyProbability != 0 || d.HeavyFactor != 0 {
		f.within(path+".heavy_factor", d.HeavyFactor, 1, 100)
	}
	if d.outlier()+d.HeavyProbability+d.CanopyProbability > 0.95 {
		f.add(path, "outlier_probability, heavy_probability and canopy_probability leave nothing for the sensor itself")
	}
	f.unless0(path+".max_range_m", d.MaxRangeM, 1, maxFarM)
	if d.CorrelationS != nil {
		f.within(path+".correlation_s", *d.CorrelationS, 0, 3600)
	}
	f.within(path+".beam_width_deg", d.BeamWidthDeg, 0, 120)
	if d.BeamReturn != "" && d.BeamReturn != ReturnMean && d.BeamReturn != ReturnNearest {
		f.add(path+".beam_return", "%q is not known: give %s or %s", d.BeamReturn, ReturnMean, ReturnNearest)
	}
	f.within(path+".attitude_sigma_deg", d.AttitudeSigmaDeg, 0, 30)
	f.canopy(path, d)
	if len(d.VerticalDatum) > maxName {
		f.add(path+".vertical_datum", "at most %d bytes are allowed", maxName)
	}
	if len(d.Nuisances) > 16 {
		f.add(path+".nuisances", "at most 16 are allowed")
	}
}

func (f *findings) canopy(path string, d Sensor) {
	f.within(path+".canopy_probability", d.CanopyProbability, 0, 0.9)
	switch {
	case d.CanopyProbability == 0 && d.CanopyHeightM == 0:
	case d.Kind != KindClearance:
		f.add(path+".canopy_probability", "a %s sees no canopy: it is of a %s", d.Kind, KindClearance)
	default:
		f.within(path+".canopy_height_m", d.CanopyHeightM, 0.1, 200)
	}
}

func (f *findings) place(path string, lon, lat *float64, height float64) {
	switch {
	case lon == nil || lat == nil:
		f.add(path, "it needs lon and lat in degrees")
	default:
		if err := geo.FromDegrees(*lon, *lat).Check(); err != nil {
			f.add(path+".lon", "%v", err)
		}
	}
	f.within(path+".height_m", height, -20000, 100000)
}

// CheckDatum compares the vertical datums of the sensors with the map's. A
// side that states none is taken on trust; two that differ are an error.
// Case and spaces do not count.
func (s *Suite) CheckDatum(mapDatum string) error {
	p := problems{what: "suite"}
	norm := func(d string) string { return strings.ToLower(strings.Join(strings.Fields(d), "")) }
	for _, d := range s.Sensors {
		if d.VerticalDatum != "" && norm(mapDatum) != "" && norm(d.VerticalDatum) != norm(mapDatum) {
			p.addf("sensor %q measures heights above %s, the map is above %s: convert one of them", d.Name, d.VerticalDatum, mapDatum)
		}
	}
	return p.err()
}
