package operate

import "github.com/prometheus/client_golang/prometheus"

// Fleet is how a server stands at one moment.
type Fleet struct {
	// Connected, Silent and Ended are the drives that are fed, that are not, and
	// that have ended and can still be asked for.
	Connected, Silent, Ended int
	// Statuses counts drives by the status of their latest posterior.
	Statuses map[string]int
	// Alarms counts those that hold, by kind.
	Alarms map[string]int
	// Cells is the number of cells or Gaussians of all beliefs, LargestCells
	// that of the largest.
	Cells, LargestCells int
	// LargestPruned is the most mass that was pruned from one belief since its
	// drive began.
	LargestPruned float64
	// Streams and Followers are Feed and Follow calls.
	Streams, Followers int
	// SearchesRunning and SearchesWaiting are whole-map searches.
	SearchesRunning, SearchesWaiting int
	// Load is the number of drives at work for each processor.
	Load  float64
	Maps  int
	Ready bool
}

// Watch has the state of a fleet in each scrape. state is called for each, from
// any goroutine.
func (m *Metrics) Watch(state func() Fleet) { m.registry.MustRegister(fleetCollector{state}) }

type fleetCollector struct{ state func() Fleet }

func gauge(name, help string, labels ...string) *prometheus.Desc {
	return prometheus.NewDesc("leadline_"+name, help, labels, nil)
}

var (
	drives        = gauge("drives", "Drives by state: connected, silent or ended.", "state")
	statuses      = gauge("vehicles", "Vehicles by the status of their latest posterior.", "status")
	alarms        = gauge("alarms", "Alarms that hold, by kind.", "kind")
	cells         = gauge("cells", "Cells or Gaussians of all beliefs.")
	largestCells  = gauge("cells_largest", "Cells or Gaussians of the largest belief.")
	largestPruned = gauge("mass_pruned_largest", "Most probability that was pruned from one belief since its drive began.")
	streams       = gauge("streams", "Streams by call: Feed or Follow.", "method")
	searches      = gauge("searches", "Searches of a whole map: running or waiting.", "state")
	loaded        = gauge("load", "Drives at work or waiting for a processor, for each processor, averaged over some seconds.")
	served        = gauge("maps", "Maps that drives may name.")
	ready         = gauge("ready", "1 if the server can serve.")
)

func (fleetCollector) Describe(to chan<- *prometheus.Desc) {
	for _, d := range []*prometheus.Desc{drives, statuses, alarms, cells, largestCells, largestPruned, streams, searches, loaded, served, ready} {
		to <- d
	}
}

func (c fleetCollector) Collect(to chan<- prometheus.Metric) {
	f := c.state()
	put := func(d *prometheus.Desc, v float64, labels ...string) {
		to <- prometheus.MustNewConstMetric(d, prometheus.GaugeValue, v, labels...)
	}
	put(drives, float64(f.Connected), "connected")
	put(drives, float64(f.Silent), "silent")
	put(drives, float64(f.Ended), "ended")
	for status, n := range f.Statuses {
		put(statuses, float64(n), status)
	}
	for kind, n := range f.Alarms {
		put(alarms, float64(n), kind)
	}
	put(cells, float64(f.Cells))
	put(largestCells, float64(f.LargestCells))
	put(largestPruned, f.LargestPruned)
	put(streams, float64(f.Streams), "Feed")
	put(streams, float64(f.Followers), "Follow")
	put(searches, float64(f.SearchesRunning), "running")
	put(searches, float64(f.SearchesWaiting), "waiting")
	put(loaded, f.Load)
	put(served, float64(f.Maps))
	up := 0.0
	if f.Ready {
		up = 1
	}
	put(ready, up)
}
