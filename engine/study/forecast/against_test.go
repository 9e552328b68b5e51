package forecast_test

import (
	"testing"

	"leadline/engine/sensor"
	"leadline/fixtures/accept"
	"leadline/fixtures/outside"
	"leadline/fixtures/study"
	"leadline/network"
)

func suiteOf(t testing.TB, text string) *sensor.Suite {
	t.Helper()
	s, err := sensor.ParseSuite("the test's", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func quillmere(t testing.TB) *network.Map {
	t.Helper()
	m, _, err := study.Quillmere()
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// against compares a forecast with three drives, and asks that the bound be right to a
// fifth on seven tenths of the route. So few have no quantiles of errors, and on
// roads the bound knows nothing of the time before the direction is known. The long form, of 200 drives and
// 200 runs, is a row of make study.
func against(t *testing.T, o *study.Outlook, err error) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
	all := make([]study.Drove, 3)
	accept.Each(len(all), func(i int) {
		d, err := o.Drive(uint64(100 + i))
		if err != nil {
			t.Error(err)
		}
		all[i] = d
	})
	bins := o.Bins(all)
	near := 0
	for _, b := range bins {
		if study.Near(b.BoundRadius95M, b.Stated) {
			near++
		}
		t.Logf("%6.0f m: bound %.2f; %d drives state %.2f, err %.2f", b.MiddleM, b.BoundRadius95M, b.Drives, b.Stated, b.ErrorP95)
	}
	if len(bins) < 20 || float64(near) < 0.7*float64(len(bins)) {
		t.Errorf("the bound is right to a fifth in only %d of %d pieces of the route", near, len(bins))
	}
}

func TestAgainstCars(t *testing.T) {
	if testing.Short() {
		t.Skip("filters for long")
	}
	o, err := study.Cars(0)
	against(t, o, err)
}

func TestAgainstFlights(t *testing.T) {
	if testing.Short() {
		t.Skip("filters for long")
	}
	outside.Path(t, "trinidad.nc")
	o, err := study.Flights(0, 120)
	against(t, o, err)
}
