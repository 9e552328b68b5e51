package roadfile

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"leadline/network"
)

// Options say how a road map is read. The zero value is useful.
type Options struct {
	// Map says how the roads become a map. An empty Licence is filled from the
	// file, where it states one.
	Map network.Options
	// JoinM is how near an end must come to another line to be joined to it,
	// in metres; 0 means 0.5 m, a negative value joins nothing.
	JoinM float64
	// SplitCrossings makes a junction wherever two lines on one layer cross.
	SplitCrossings bool
	// Classes are the values of the highway tag that are roads; nil means
	// Drivable. The single value "*" takes every class.
	Classes []string
	// SkipPrivate leaves out roads with access=no or access=private.
	SkipPrivate bool
	// MaxBytes bounds the size of the file; 0 means 4 GiB. What a compressed
	// file unpacks to may be sixteen times that.
	MaxBytes int64
}

// Drivable lists the classes of road that are read unless Options say
// otherwise: those that OpenStreetMap describes as open to motor traffic.
func Drivable() []string {
	return []string{
		"motorway", "motorway_link", "trunk", "trunk_link", "primary", "primary_link",
		"secondary", "secondary_link", "tertiary", "tertiary_link",
		"unclassified", "residential", "living_street", "service", "road",
	}
}

// Bounds of what is read.
const (
	maxFeatures = 20_000_000
	maxVertices = 100_000_000
	maxPerLine  = 1_000_000
	maxJoinM    = 50
	// maxExtentKM is how far a map may reach: beyond that one metric frame
	// distorts too much to be drawn or searched in.
	maxExtentKM = 2000
)

// Validate lists everything that is wrong with the options.
func (o Options) Validate() error {
	var wrong []string
	if err := o.Map.Validate(); err != nil {
		wrong = append(wrong, err.Error())
	}
	if math.IsNaN(o.JoinM) || o.JoinM > maxJoinM {
		wrong = append(wrong, fmt.Sprintf("joining distance %v m is not below %d m", o.JoinM, maxJoinM))
	}
	if o.MaxBytes < 0 {
		wrong = append(wrong, fmt.Sprintf("size bound %d is negative", o.MaxBytes))
	}
	if len(wrong) > 0 {
		return fmt.Errorf("road options: %s", strings.Join(wrong, "; "))
	}
	return nil
}

func (o Options) withDefaults() Options {
	if o.JoinM == 0 {
		o.JoinM = 0.5
	}
	if o.Classes == nil {
		o.Classes = Drivable()
	}
	if o.MaxBytes == 0 {
		o.MaxBytes = 4 << 30
	}
	return o
}

func (o *Options) takes(class string) bool {
	return slices.Contains(o.Classes, class) || len(o.Classes) == 1 && o.Classes[0] == "*"
}

// Notes say what reading did to the roads of a file.
type Notes struct {
	Format   string `json:"format"`   // "GeoJSON", "OpenStreetMap XML", "OpenStreetMap PBF"
	Features int    `json:"features"` // lines, areas and points in the file
	Lines    int    `json:"lines"`    // of them taken as roads
	Vertices int    `json:"vertices"` // of those lines

	Tunnels int `json:"tunnels"` // lines in tunnels
	Bridges int `json:"bridges"` // lines on bridges

	OtherClass    int `json:"other_class"` // lines left out for their highway tag
	Private       int `json:"private"`     // for their access tag
	Areas         int `json:"areas"`       // polygons, and lines with area=yes
	Points        int `json:"points"`
	NoGeometry    int `json:"no_geometry"`    // features whose geometry is null or empty
	MissingNodes  int `json:"missing_nodes"`  // nodes of ways that the extract does not hold
	JoinedEnds    int `json:"joined_ends"`    // ends joined because they came near
	Crossings     int `json:"crossings"`      // junctions made by SplitCrossings
	Repeated      int `json:"repeated"`       // roads left out because another one has the same points
	NoLength      int `json:"no_length"`      // lines or roads of no length, left out
	Bans          int `json:"bans"`           // forbidden turns
	UnusedBans    int `json:"unused_bans"`    // turn restrictions via a way, or that name no road read
	ThroughJoints int `json:"through_joints"` // places where two lines of the same road became one

	// Unknown are values of tags that mean nothing here, in the order in which
	// they came, at most maxUnknown different ones. The tag counts as left out.
	Unknown []UnknownValue `json:"unknown"`
}

// UnknownValue is a value of a tag that means nothing here.
type UnknownValue struct {
	Tag   string `json:"tag"`
	Value string `json:"value"`
	Count int    `json:"count"`
	First string `json:"first"` // the feature that had it first
}

// maxUnknown bounds the list of unknown values.
const maxUnknown = 20

// unknown notes the values of a road's tags that mean nothing here.
func (n *Notes) unknown(t tags, feature string) {
	for _, tag := range checkedTags {
		v := t(tag.name)
		if v == "" || tag.known(v) {
			continue
		}
		i := slices.IndexFunc(n.Unknown, func(u UnknownValue) bool { return u.Tag == tag.name && u.Value == v })
		switch {
		case i >= 0:
			n.Unknown[i].Count++
		case len(n.Unknown) < maxUnknown:
			n.Unknown = append(n.Unknown, UnknownValue{tag.name, v, 1, feature})
		}
	}
}

// String describes the notes in a few sentences.
func (n Notes) String() string {
	var b strings.Builder
	fmt.Fprintf(&b, "%s: %d of %d features are roads, with %d vertices; %d are in tunnels, %d on bridges.", n.Format, n.Lines, n.Features, n.Vertices, n.Tunnels, n.Bridges)
	list := func(intro string, parts ...any) {
		sep := intro
		for i := 0; i < len(parts); i += 2 {
			if k := parts[i].(int); k > 0 {
				fmt.Fprintf(&b, "%s%d %s", sep, k, parts[i+1])
				sep = ", "
			}
		}
		if sep == ", " {
			b.WriteString(".")
		}
	}
	list(" Left out: ", n.OtherClass, "of other classes", n.Private, "private", n.Areas, "areas",
		n.Points, "points", n.NoGeometry, "without geometry", n.NoLength, "of no length",
		n.Repeated, "repeated", n.UnusedBans, "turn restrictions", n.MissingNodes, "vertices that the file does not hold")
	list(" Made: ", n.JoinedEnds, "joints of ends that came near", n.Crossings, "junctions at crossings",
		n.Bans, "forbidden turns", n.ThroughJoints, "joints within one road")
	for _, u := range n.Unknown {
		fmt.Fprintf(&b, "\nnote: %s=%.40q means nothing here and counts as left out, %d times, first in %s", u.Tag, u.Value, u.Count, u.First)
	}
	return b.String()
}
