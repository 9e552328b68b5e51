package web

import (
	"fmt"
	"net"
	"net/http"
	"net/url"
	"strings"
)

// guard keeps pages of strangers from calling the API with the reach of the
// browser that they are open in.
type guard struct {
	origins    map[string]bool
	hosts      map[string]bool // of the origins
	protection *http.CrossOriginProtection
}

func newGuard(origins []string) (*guard, error) {
	g := &guard{origins: map[string]bool{}, hosts: map[string]bool{}, protection: http.NewCrossOriginProtection()}
	for _, o := range origins {
		if err := g.protection.AddTrustedOrigin(o); err != nil {
			return nil, fmt.Errorf("origin %q: give scheme, host and port, such as https://map.example or http://127.0.0.1:8080", o)
		}
		u, err := url.Parse(o)
		if err != nil {
			return nil, fmt.Errorf("origin %q: %w", o, err)
		}
		g.origins[o] = true
		g.hosts[strings.ToLower(u.Hostname())] = true
	}
	return g, nil
}

// check refuses what a page of another origin sends, and requests under a name
// that is not known to be this server's: a stranger's page may have had its own
// name point here. An address cannot be made to.
func (g *guard) check(r *http.Request) error {
	host := r.Host
	if h, _, err := net.SplitHostPort(host); err == nil {
		host = h
	}
	host = strings.ToLower(strings.Trim(host, "[]"))
	// A certificate has proved the name where there is one.
	if net.ParseIP(host) == nil && host != "localhost" && !g.hosts[host] && encryptionOf(r.Context()) == nil {
		return fmt.Errorf("this server does not know itself as host %.200q: ask under its address, or start it with --origin and the name", r.Host)
	}
	if err := g.protection.Check(r); err != nil {
		return fmt.Errorf("a page of origin %.200q may not call this server: start it with --origin and that origin", r.Header.Get("Origin"))
	}
	return nil
}

// cross tells a browser what pages of the known origins may do (the Fetch
// standard's CORS protocol). It reports whether it has answered the request,
// which was only that question.
func (g *guard) cross(w http.ResponseWriter, r *http.Request) (answered bool) {
	h := w.Header()
	h.Add("Vary", "Origin")
	origin := r.Header.Get("Origin")
	asked := r.Method == http.MethodOptions && r.Header.Get("Access-Control-Request-Method") != ""
	if g.origins[origin] {
		h.Set("Access-Control-Allow-Origin", origin)
		h.Set("Access-Control-Expose-Headers", "Leadline-Version, Grpc-Status, Grpc-Message, Grpc-Status-Details-Bin")
		if asked {
			h.Set("Access-Control-Allow-Methods", "POST")
			h.Set("Access-Control-Allow-Headers", "Authorization, Content-Type, Connect-Protocol-Version, Connect-Timeout-Ms, Grpc-Timeout, X-Grpc-Web, X-User-Agent")
			h.Set("Access-Control-Max-Age", "7200")
		}
	}
	if asked {
		w.WriteHeader(http.StatusNoContent)
	}
	return asked
}
