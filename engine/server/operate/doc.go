// Package operate is what an operator sees of a server: counts and gauges for
// Prometheus, traces by OpenTelemetry, whether it can serve, profiles, and how much garbage gathers. Nothing in it names a
// vehicle or says where one is.
package operate
