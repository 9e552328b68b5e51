package logfile

import (
	"fmt"
	"slices"
	"strings"
	"unicode/utf8"

	"leadline/engine/sensor"
)

// Columns is a column file: what the columns of a table are. Its keys are
// those of the YAML file; one that is left out takes the default given here.
type Columns struct {
	// Delimiter stands between cells: one character, or tab, or space for one
	// or more spaces or tabs. A comma unless said.
	Delimiter string `yaml:"delimiter"`
	// DecimalComma: numbers have a comma where others have a point.
	DecimalComma bool `yaml:"decimal_comma"`
	// Header: the first row names the columns. Otherwise columns are numbered
	// from 1. True unless said.
	Header *bool `yaml:"header"`
	// SkipLines is the number of lines before the header or the first row.
	SkipLines int `yaml:"skip_lines"`
	// Comment begins lines that are no rows; "" unless said.
	Comment string `yaml:"comment"`
	// Missing lists what a cell without a value holds, beside nothing at all:
	// NaN, nan, NA, N/A, null and - unless said.
	Missing []string `yaml:"missing"`
	// Time is the time of each row.
	Time TimeColumn `yaml:"time"`
	// Sensors is what the rows hold.
	Sensors []SensorColumns `yaml:"sensors"`
	// Truth is where the vehicle was, if the table has it: lon, lat,
	// height_m, sigma_m.
	Truth *SensorColumns `yaml:"truth"`
}

// TimeColumn is the column, or the columns, joined by a space, that hold the
// time, and how.
type TimeColumn struct {
	Column     string   `yaml:"column"`
	Columns    []string `yaml:"columns"`
	TimeFormat `yaml:",inline"`
}

// SensorColumns is one sensor's share of a row.
type SensorColumns struct {
	Name string `yaml:"name"` // the kind unless said
	Kind string `yaml:"kind"`
	// When picks rows: those where a column holds a text.
	When *When `yaml:"when"`
	// MaxGapS is the longest time that an increment may cover, in seconds: 10
	// unless said, and for counters 24 h.
	MaxGapS float64 `yaml:"max_gap_s"`
	// Since is where increments have a column for their beginning, in the
	// format of Time; Interval for their length. Otherwise an increment begins
	// at the sensor's row before.
	Since    string           `yaml:"since_column"`
	Interval *Field           `yaml:"interval"`
	Fields   map[string]Field `yaml:"fields"`
}

// When picks the rows in which a column holds exactly a text.
type When struct {
	Column string `yaml:"column"`
	Equals string `yaml:"equals"`
}

// Field is where a field of a measurement comes from: a column, or a constant
// for all rows. A cell x of a column becomes sign·scale·x in Unit, plus Offset
// in the field's own unit.
type Field struct {
	Column string   `yaml:"column"`
	Value  *float64 `yaml:"value"` // in the field's own unit, or in Unit
	Text   string   `yaml:"text"`
	// Unit is the column's; the field's own, which its name ends in, unless
	// said.
	Unit   string  `yaml:"unit"`
	Sign   int     `yaml:"sign"`  // 1 or -1
	Scale  float64 `yaml:"scale"` // 1 unless said
	Offset float64 `yaml:"offset"`
	// Counter: the column counts up, and its differences are the increments.
	// Wrap is the reading, in the column's unit, at which it begins again at 0,
	// such as 360 for an integrated heading; it then moves by less than half
	// of that between rows. MaxRate is the most that a second can bring, in the
	// field's own unit: 150 m, 720° unless said. More is a jump: it is refused,
	// and counting begins anew.
	Counter bool    `yaml:"counter"`
	Wrap    float64 `yaml:"wrap"`
	MaxRate float64 `yaml:"max_rate"`
	// Rate: the column is a rate. "interval" says that it is the mean since
	// the row before, and the increment is rate × time; "instant" that it is
	// the rate at the row's time, and the increment is the mean of this and the
	// row before × time.
	Rate string `yaml:"rate"`
}

// Limits of a column file and of its table.
const (
	maxSensors = 256
	maxName    = 256 // bytes, as the API has it
	maxSkip    = 1000
	maxCells   = 4096 // of a row
	maxRow     = 64 << 10
)

var defaultMissing = []string{"NaN", "nan", "NA", "N/A", "null", "-"}

// ParseColumns reads a column file. name is used in errors only. Everything
// that is wrong is an error with its line.
func ParseColumns(name string, text []byte) (*Columns, error) {
	c := &Columns{}
	y, err := sensor.ParseYAML("column file", name, text, c, "docs/drives.md under Logs of your own")
	if err != nil {
		return nil, err
	}
	p := problems{}
	c.check(&p)
	if err := y.Error(p); err != nil {
		return nil, err
	}
	return c, nil
}

// problems collects what is wrong with settings.
type problems []sensor.Finding

func (p *problems) addf(path, format string, args ...any) {
	*p = append(*p, sensor.Finding{Path: path, Text: fmt.Sprintf(format, args...)})
}

func (p *problems) within(path string, v, lo, hi float64) {
	if !(v >= lo && v <= hi) {
		p.addf(path, "%v must be a number from %v to %v", v, lo, hi)
	}
}

func (c *Columns) check(p *problems) {
	switch {
	case c.Delimiter == "", c.Delimiter == "tab", c.Delimiter == "space":
	case utf8.RuneCountInString(c.Delimiter) != 1 || len(c.Delimiter) != 1 || strings.ContainsAny(c.Delimiter, "\"0123456789.+-eE\r\n"):
		p.addf("delimiter", "%.20q cannot stand between cells: give one character, tab or space", c.Delimiter)
	}
	if c.DecimalComma && c.delimiter() == ',' {
		p.addf("decimal_comma", "a comma cannot stand within numbers and between cells: give another delimiter")
	}
	if c.SkipLines < 0 || c.SkipLines > maxSkip {
		p.addf("skip_lines", "%d must be from 0 to %d", c.SkipLines, maxSkip)
	}
	c.checkTime(p)
	if len(c.Sensors) == 0 && c.Truth == nil {
		p.addf("sensors", "there are none: say what the columns are")
	}
	if len(c.Sensors) > maxSensors {
		p.addf("sensors", "%d sensors: at most %d", len(c.Sensors), maxSensors)
		return
	}
	seen := map[string]bool{}
	for i, s := range c.Sensors {
		path := fmt.Sprintf("sensors[%d]", i)
		if _, ok := kindTable[s.Kind]; !ok || s.Kind == kindTruth {
			p.addf(path+".kind", "%.40q is no kind of measurement: the kinds are %s", s.Kind, strings.Join(sensor.Kinds(), ", "))
			continue
		}
		name := s.name()
		if seen[name+"\x00"+whenKey(s.When)] {
			p.addf(path+".name", "%q is there twice", name)
		}
		seen[name+"\x00"+whenKey(s.When)] = true
		s.check(p, path, s.Kind)
	}
	if c.Truth != nil {
		t := *c.Truth
		if t.Name != "" || t.Kind != "" {
			p.addf("truth", "it has neither name nor kind: remove them")
		}
		t.check(p, "truth", kindTruth)
	}
}

func (c *Columns) checkTime(p *problems) {
	columns := c.Time.columns()
	if (c.Time.Column != "") == (len(c.Time.Columns) > 0) {
		p.addf("time", "give column, or columns")
	}
	if len(columns) > 8 || slices.Contains(columns, "") {
		p.addf("time.columns", "give the names of 1 to 8 columns")
	}
	_, wrong := c.Time.compile()
	for _, key := range []string{"format", "start", "layout"} {
		if text := wrong[key]; text != "" {
			p.addf("time."+key, "%s", text)
		}
	}
}

func whenKey(w *When) string {
	if w == nil {
		return ""
	}
	return w.Column + "\x00" + w.Equals
}

func (s *SensorColumns) name() string {
	if s.Name == "" {
		return s.Kind
	}
	return s.Name
}

func (c *Columns) delimiter() byte {
	switch c.Delimiter {
	case "":
		return ','
	case "tab":
		return '\t'
	case "space":
		return ' '
	}
	return c.Delimiter[0]
}

func (t *TimeColumn) columns() []string {
	if t.Column != "" {
		return []string{t.Column}
	}
	return t.Columns
}
