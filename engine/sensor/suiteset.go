package sensor

import (
	"fmt"
	"reflect"
	"slices"
	"strconv"
	"strings"
)

// Set returns a copy of the suite in which a key has another value; nil counts
// as the suite that says nothing, and s itself is not touched. A key is the
// path of a figure in a suite file, in which an element of a list goes by its
// name or id, or by its index from 0:
//
//	vehicle.alert_limit_m, sensors.odo.noise.sigma_m, beacons.mast.lon
//
// The copy is valid. An error names the key, in one line: no such key, no such
// element, a value of another type or beyond its range.
func (s *Suite) Set(key, value string) (*Suite, error) {
	c := s.clone()
	at, err := c.at(key)
	if err != nil {
		return nil, err
	}
	if err := assign(at, key, value); err != nil {
		return nil, err
	}
	if err := c.Validate(); err != nil {
		return nil, fmt.Errorf("%s = %s: %w", key, value, err)
	}
	return c, nil
}

// Figure returns the number that a key has, as Set knows it; ok is false for
// one that the suite leaves to its default. A key that is no number is an error.
func (s *Suite) Figure(key string) (v float64, ok bool, err error) {
	at, err := s.clone().at(key)
	if err != nil {
		return 0, false, err
	}
	if at.Kind() == reflect.Pointer {
		if at.IsNil() {
			return 0, false, numeric(at.Type().Elem(), key)
		}
		at = at.Elem()
	}
	if err := numeric(at.Type(), key); err != nil {
		return 0, false, err
	}
	return at.Float(), at.Float() != 0, nil
}

func numeric(t reflect.Type, key string) error {
	if t.Kind() != reflect.Float64 {
		return fmt.Errorf("suite key %s is no figure", key)
	}
	return nil
}

// clone copies all that Set may change.
func (s *Suite) clone() *Suite {
	if s == nil {
		return &Suite{}
	}
	c := *s
	c.Sensors = slices.Clone(s.Sensors)
	for i := range c.Sensors {
		c.Sensors[i].Nuisances = slices.Clone(c.Sensors[i].Nuisances)
	}
	c.Beacons, c.Posts = slices.Clone(s.Beacons), slices.Clone(s.Posts)
	c.Traffic.Road, c.Traffic.Lines = slices.Clone(s.Traffic.Road), slices.Clone(s.Traffic.Lines)
	return &c
}

// at finds what a key names.
func (s *Suite) at(key string) (reflect.Value, error) {
	v := reflect.ValueOf(s).Elem()
	parts := strings.Split(key, ".")
	for i, part := range parts {
		here := strings.Join(parts[:i], ".")
		switch v.Kind() {
		case reflect.Struct:
			f, names := yamlField(v, part)
			if !f.IsValid() {
				return v, fmt.Errorf("suite key %s: there is no %q%s: there are %s", key, part, in(here), strings.Join(names, ", "))
			}
			v = f
		case reflect.Slice:
			e, names := element(v, part)
			if !e.IsValid() {
				if len(names) == 0 {
					return v, fmt.Errorf("suite key %s: %s has no elements", key, here)
				}
				return v, fmt.Errorf("suite key %s: there is no %q%s: there are %s", key, part, in(here), strings.Join(names, ", "))
			}
			v = e
		default:
			return v, fmt.Errorf("suite key %s: %s is a value and has no parts", key, here)
		}
	}
	if v.Kind() == reflect.Struct || v.Kind() == reflect.Slice {
		return v, fmt.Errorf("suite key %s has parts: name one of them, as in %s.…", key, key)
	}
	return v, nil
}

func in(path string) string {
	if path == "" {
		return ""
	}
	return " in " + path
}

// yamlField returns a field by its name in files, and what names there are.
func yamlField(v reflect.Value, name string) (reflect.Value, []string) {
	var names []string
	for i := range v.NumField() {
		tag := v.Type().Field(i).Tag.Get("yaml")
		if tag == name {
			return v.Field(i), nil
		}
		names = append(names, tag)
	}
	return reflect.Value{}, names
}

// element returns an element by its name or id, or by its index.
func element(v reflect.Value, name string) (reflect.Value, []string) {
	var names []string
	for i := range v.Len() {
		e := v.Index(i)
		id := e.FieldByName("Name")
		if !id.IsValid() {
			id = e.FieldByName("ID")
		}
		if id.String() == name {
			return e, nil
		}
		names = append(names, id.String())
	}
	if i, err := strconv.Atoi(name); err == nil && i >= 0 && i < v.Len() {
		return v.Index(i), nil
	}
	return reflect.Value{}, names
}

func assign(v reflect.Value, key, value string) error {
	if v.Kind() == reflect.Pointer {
		v.Set(reflect.New(v.Type().Elem()))
		v = v.Elem()
	}
	wrong := func(want string) error { return fmt.Errorf("suite key %s is %q: want %s", key, value, want) }
	switch v.Kind() {
	case reflect.Float64:
		x, err := strconv.ParseFloat(value, 64)
		if err != nil {
			return wrong("one number")
		}
		v.SetFloat(x)
	case reflect.Int:
		x, err := strconv.Atoi(value)
		if err != nil {
			return wrong("a whole number")
		}
		v.SetInt(int64(x))
	case reflect.Bool:
		x, err := strconv.ParseBool(value)
		if err != nil {
			return wrong("true or false")
		}
		v.SetBool(x)
	default:
		v.SetString(value)
	}
	return nil
}
