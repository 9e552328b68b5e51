package sensor

// Bounds of what a suite lists.
const (
	maxSensors = 256
	maxPlaces  = 4096
)

// ParseSuite reads a suite from YAML (ParseYAML). name is used in errors
// only. Everything that Validate finds is an error with its line.
func ParseSuite(name string, text []byte) (*Suite, error) {
	s := &Suite{}
	y, err := ParseYAML("suite", name, text, s, "the four suites that come with the program")
	if err != nil {
		return nil, err
	}
	if err := y.Error(s.problems()); err != nil {
		return nil, err
	}
	return s, nil
}
