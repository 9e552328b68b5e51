package roadfile

import (
	"slices"
	"strconv"
	"strings"

	"leadline/network"
)

// tags looks up the tags of a feature; "" if it has none of that name.
type tags func(key string) string

// direction says in which directions a line may be driven.
type direction struct{ forward, backward bool }

// attributes reads the tags of a road.
func (t tags) attributes() network.Attributes {
	junction := t("junction")
	return network.Attributes{
		Name:     t("name"),
		Ref:      t("ref"),
		Class:    t("highway"),
		SpeedMps: speedLimit(t("maxspeed")),
		Tunnel:   isSet(t("tunnel")),
		Bridge:   isSet(t("bridge")),
		Circle:   junction == "roundabout" || junction == "circular",
		Layer:    layer(t("layer")),
	}
}

func isSet(v string) bool { return v != "" && v != "no" && v != "false" && v != "0" }

// direction reads oneway. Roundabouts and motorways are one-way unless they
// say otherwise; reversible roads are open both ways, one after the other.
func (t tags) direction(a network.Attributes) direction {
	switch t("oneway") {
	case "yes", "true", "1":
		return direction{forward: true}
	case "-1", "reverse":
		return direction{backward: true}
	case "no", "false", "0", "reversible", "alternating":
		return direction{true, true}
	}
	if a.Circle || a.Class == "motorway" {
		return direction{forward: true}
	}
	return direction{true, true}
}

// checkedTags are those of which an unknown value changes what the map says.
var checkedTags = []struct {
	name  string
	known func(v string) bool
}{
	{"oneway", func(v string) bool {
		return slices.Contains([]string{"yes", "true", "1", "-1", "reverse", "no", "false", "0", "reversible", "alternating"}, v)
	}},
	{"layer", func(v string) bool {
		_, err := strconv.ParseInt(strings.TrimSpace(v), 10, 64)
		return err == nil
	}},
}

// layer returns a whole number, 0 if there is none; ordinary maps use -5 to 5,
// and what an int8 does not hold is cut off.
func layer(v string) int8 {
	n, err := strconv.ParseInt(strings.TrimSpace(v), 10, 64)
	if err != nil {
		return 0
	}
	return int8(max(-128, min(127, n)))
}

// speedLimit returns a speed in m/s: a number of km/h, or of "mph", "km/h",
// "kmh" or "knots". Anything else (none, signals, walk, country codes) gives
// 0: unknown.
func speedLimit(v string) float64 {
	number, unit, _ := strings.Cut(strings.TrimSpace(v), " ")
	if unit == "" {
		for _, u := range []string{"mph", "km/h", "kmh", "kph", "knots"} {
			if n, ok := strings.CutSuffix(number, u); ok {
				number, unit = n, u
			}
		}
	}
	x, err := strconv.ParseFloat(number, 64)
	if err != nil || !(x > 0 && x < 1000) {
		return 0
	}
	switch unit {
	case "", "km/h", "kmh", "kph":
		return x / 3.6
	case "mph":
		return x * 0.44704 // 1 mile is 1609.344 m
	case "knots":
		return x * 1852 / 3600
	}
	return 0
}
