package journal

import (
	"fmt"
	"net"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/nats-io/nats-server/v2/server"
)

// freePorts are ports that nobody listened on a moment ago.
func freePorts(t *testing.T, n int) (ports []int) {
	t.Helper()
	for range n {
		l, err := net.Listen("tcp", "127.0.0.1:0")
		if err != nil {
			t.Fatal(err)
		}
		defer l.Close()
		ports = append(ports, l.Addr().(*net.TCPAddr).Port)
	}
	return ports
}

// TestClusterExample runs three brokers with the example's settings, but for ports
// and TLS, and keeps a journal of three replicas with them, which holds all that was
// acknowledged; with LEADLINE_LONG also when one of them has gone, the stream's leader.
func TestClusterExample(t *testing.T) {
	if testing.Short() {
		t.Skip("three brokers choose leaders: not with -short")
	}
	text, err := os.ReadFile("../../docs/operate/nats/broker.conf")
	if err != nil {
		t.Fatal(err)
	}
	conf := regexp.MustCompile(`(?ms)^ *tls \{.*?\n *\}\n`).ReplaceAllString(string(text), "")
	ports := freePorts(t, 6)
	conf = regexp.MustCompile(`routes: .*`).ReplaceAllString(conf, fmt.Sprintf(`routes: ["nats-route://127.0.0.1:%d", "nats-route://127.0.0.1:%d", "nats-route://127.0.0.1:%d"]`, ports[3], ports[4], ports[5]))
	dir := t.TempDir()
	var brokers []*server.Server
	var urls []string
	for i, name := range []string{"a", "b", "c"} {
		t.Setenv("NAME", name)
		t.Setenv("STORE", filepath.Join(dir, name))
		path := filepath.Join(dir, name+".conf")
		own := strings.NewReplacer("0.0.0.0:4222", fmt.Sprint("127.0.0.1:", ports[i]), "0.0.0.0:6222", fmt.Sprint("127.0.0.1:", ports[3+i])).Replace(conf)
		if err := os.WriteFile(path, []byte(own), 0o600); err != nil {
			t.Fatal(err)
		}
		o, err := server.ProcessConfigFile(path)
		if err != nil {
			t.Fatal(err)
		}
		if !o.JetStream || !o.SyncAlways || o.MaxPayload < maxMessage {
			t.Errorf("the example has JetStream %v, sync always %v, messages of up to %d bytes", o.JetStream, o.SyncAlways, o.MaxPayload)
		}
		o.NoSigs, o.NoLog = true, true
		b, err := server.NewServer(o)
		if err != nil {
			t.Fatal(err)
		}
		b.Start()
		t.Cleanup(func() { b.Shutdown(); b.WaitForShutdown() })
		brokers = append(brokers, b)
		urls = append(urls, fmt.Sprint("nats://127.0.0.1:", ports[i]))
	}
	until := func(what string, is func() bool) {
		t.Helper()
		for end := time.Now().Add(time.Minute); !is(); time.Sleep(20 * time.Millisecond) {
			if time.Now().After(end) {
				t.Fatal(what)
			}
		}
	}
	until("the brokers choose no leader", func() bool {
		return slices.ContainsFunc(brokers, (*server.Server).JetStreamIsLeader) && !slices.ContainsFunc(brokers, func(b *server.Server) bool { return !b.JetStreamIsCurrent() })
	})
	o := Options{Broker: Broker{URL: strings.Join(urls, ","), Replicas: 3}, MaxBytes: minBytes, Partitions: 2}
	j, _ := openAt(t, o)
	l := j.Begin("v")
	var want []string
	add := func(n int) {
		for range n {
			text := fmt.Sprint("record ", len(want))
			until("a record is not taken", func() bool {
				_, err := put(l, 1, []byte(text))
				if err != nil {
					t.Logf("%s: %v", text, err)
					l.Mend()
				}
				return err == nil
			})
			want = append(want, text)
		}
	}
	add(20)
	leader := slices.IndexFunc(brokers, func(b *server.Server) bool { return b.JetStreamIsStreamLeader("$G", streamName) })
	if leader < 0 {
		t.Fatal("the stream has no leader")
	}
	if os.Getenv("LEADLINE_LONG") != "" { // it takes the others some seconds to notice
		brokers[leader].Shutdown()
		brokers[leader].WaitForShutdown()
		add(20)
	}
	j.Close()
	_, k := openAt(t, o)
	if len(k.found.Damage) > 0 || !slices.Equal(texts(k.lines[l.Place()]), want) {
		t.Errorf("%d of %d records, damage %v", len(k.lines[l.Place()]), len(want), k.found.Damage)
	}
}
