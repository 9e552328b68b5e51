package operate

import (
	"context"
	"fmt"
	"net"
	"net/http"
	"net/http/pprof"
	"time"

	"github.com/prometheus/client_golang/prometheus/promhttp"
)

// Handler answers an operator: /metrics, /live and /ready, and under
// /debug/pprof/ profiles, to this machine alone. can says why the server cannot
// serve, nil if it can.
func (m *Metrics) Handler(can func() error) http.Handler {
	mux := http.NewServeMux()
	mux.Handle("GET /metrics", promhttp.HandlerFor(m.registry, promhttp.HandlerOpts{MaxRequestsInFlight: 4, Timeout: 20 * time.Second}))
	mux.HandleFunc("GET /live", func(w http.ResponseWriter, _ *http.Request) { fmt.Fprintln(w, "it answers") })
	mux.HandleFunc("GET /ready", func(w http.ResponseWriter, _ *http.Request) {
		if err := can(); err != nil {
			http.Error(w, err.Error(), http.StatusServiceUnavailable)
			return
		}
		fmt.Fprintln(w, "it can serve")
	})
	for path, h := range map[string]http.HandlerFunc{
		"": pprof.Index, "cmdline": pprof.Cmdline, "profile": pprof.Profile, "symbol": pprof.Symbol, "trace": pprof.Trace,
	} {
		mux.HandleFunc("GET /debug/pprof/"+path, here(h))
	}
	return mux
}

// here answers this machine alone, through whatever address it came. A name
// other than this machine's is refused, too: a stranger's page may have had its
// own point here.
func here(h http.HandlerFunc) http.HandlerFunc {
	return func(w http.ResponseWriter, r *http.Request) {
		from, _, err := net.SplitHostPort(r.RemoteAddr)
		host := r.Host
		if h, _, err := net.SplitHostPort(host); err == nil {
			host = h
		}
		if err != nil || !net.ParseIP(from).IsLoopback() || host != "localhost" && net.ParseIP(host) == nil {
			http.Error(w, "profiles are for this machine alone: ask from there, under its address", http.StatusForbidden)
			return
		}
		h(w, r)
	}
}

// Serve answers an operator on a listener until stop is called, which waits for
// what is being answered, for at most a second.
func Serve(l net.Listener, h http.Handler) (stop func()) {
	s := &http.Server{Handler: h, ReadHeaderTimeout: 5 * time.Second, ReadTimeout: 10 * time.Second, IdleTimeout: time.Minute, MaxHeaderBytes: 16 << 10}
	done := make(chan struct{})
	go func() {
		defer close(done)
		_ = s.Serve(l) // ends with stop
	}()
	return func() {
		ctx, cancel := context.WithTimeout(context.Background(), time.Second)
		defer cancel()
		if s.Shutdown(ctx) != nil {
			_ = s.Close()
		}
		<-done
	}
}
