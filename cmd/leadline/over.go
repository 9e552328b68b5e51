package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"net/url"
	"os"
	"runtime"
	"slices"
	"strings"
	"sync"
	"time"

	"github.com/spf13/cobra"

	"leadline/engine/journal"
	"leadline/engine/study/afar"
	"leadline/engine/study/sweep"
)

// overOptions say by way of which broker a replay's runs go to other machines.
type overOptions struct {
	broker    journal.Broker
	lostAfter time.Duration
}

// whereFlags are the flags that say where runs are done: results do not depend on it.
var whereFlags = []string{"over", "lost-after", "broker-credentials", "broker-authority", "broker-certificate", "broker-key"}

func (o *overOptions) flags(c *cobra.Command) {
	f := c.Flags()
	f.StringVar(&o.broker.URL, "over", "", "have `leadline work` on other machines do the runs, by way of the NATS servers with JetStream at nats://HOST:PORT or tls://HOST:PORT, several with commas")
	f.DurationVar(&o.lostAfter, "lost-after", 30*time.Second, "with --over: after how long without a sign of life a worker's run is given to another one")
	brokerFlags(c, &o.broker)
}

// inFlight is how many runs wait at the broker or are being done at a time, unless
// --parallel says so.
const inFlight = 64

// handOver has a job's runs done by workers.
func (o *replayOptions) handOver(ctx context.Context, job *sweep.Job, meter *meter) (*afar.Queue, error) {
	if o.explain != "" || o.diagnose == diagnoseAlways {
		return nil, errors.New("--explain and --diagnose always look at a drive on this machine: leave out --over")
	}
	if o.over.lostAfter < time.Second || o.over.lostAfter > time.Hour {
		return nil, fmt.Errorf("--lost-after is %v: give 1s to 1h", o.over.lostAfter)
	}
	program, err := thisProgram()
	if err != nil {
		return nil, err
	}
	if err := checkBroker("--over", &o.over.broker); err != nil {
		return nil, err
	}
	queue, err := afar.Open(ctx, afar.QueueOptions{
		Broker: o.over.broker, Program: program, LostAfter: o.over.lostAfter,
		Say: func(line string) { meter.say(line) },
	})
	if err != nil {
		return nil, fmt.Errorf("--over: %w", err)
	}
	if job.Keep, job.Elsewhere = false, queue; job.Parallel == 0 {
		job.Parallel = inFlight
	}
	return queue, nil
}

// checkBroker reports an address that is none, and half of a pair of files.
func checkBroker(flag string, b *journal.Broker) error {
	for _, address := range strings.Split(b.URL, ",") {
		if u, err := url.Parse(strings.TrimSpace(address)); err != nil || u.Host == "" {
			return fmt.Errorf("%s: an address of a broker is nats://HOST:PORT or tls://HOST:PORT", flag)
		}
	}
	if (b.Certificate == "") != (b.Key == "") {
		return errors.New("of --broker-certificate and --broker-key only one is given: give both")
	}
	return nil
}

// thisProgram is what workers compare with theirs.
func thisProgram() (afar.Program, error) {
	sum, err := buildIdentity()
	return afar.Program{Version: versionText(), SHA256: sum, Architecture: runtime.GOARCH}, err
}

// withoutWhere leaves out of a command line what says where runs are done: nor does
// what a broker's address may hold belong into results.
func withoutWhere(args []string) (out []string) {
	for i := 0; i < len(args); i++ {
		name, _, whole := strings.Cut(strings.TrimPrefix(args[i], "--"), "=")
		if strings.HasPrefix(args[i], "--") && slices.Contains(whereFlags, name) {
			if !whole {
				i++
			}
			continue
		}
		out = append(out, args[i])
	}
	return out
}

func workCommand() *cobra.Command {
	var b journal.Broker
	var parallel int
	c := &cobra.Command{
		Use:   "work --broker ADDRESS",
		Short: "Do runs of a replay on another machine",
		Long: `Work does runs of a replay that another machine asks for with --over, until it is
interrupted: what is under way is then done by another worker. Maps and drives come
by way of the broker. It must be the same program as the replay's.`,
		Args: cobra.NoArgs,
		RunE: func(c *cobra.Command, _ []string) error {
			if b.URL == "" {
				return errors.New("no broker is given: give --broker nats://HOST:PORT, as the replay has it with --over")
			}
			if err := checkBroker("--broker", &b); err != nil {
				return err
			}
			if parallel < 0 {
				return fmt.Errorf("--parallel is %d: give a whole number, 0 or more", parallel)
			}
			program, err := thisProgram()
			if err != nil {
				return err
			}
			ctx, stop := untilSignal()
			defer stop()
			var mu sync.Mutex
			return afar.Work(ctx, afar.WorkOptions{
				Broker: b, Program: program, Name: workerName(), Parallel: parallel,
				OpenMap: func(path string) (*sweep.Map, io.Closer, error) {
					m, err := openMap(path)
					if err != nil {
						return nil, nil, err
					}
					return m.forStudies(), m, nil
				},
				Say: func(line string) {
					mu.Lock()
					defer mu.Unlock()
					fmt.Fprintln(c.ErrOrStderr(), oneLine(line))
				},
			})
		},
	}
	f := c.Flags()
	f.StringVar(&b.URL, "broker", "", "the broker, NATS servers with JetStream: nats://HOST:PORT or tls://HOST:PORT, several with commas")
	f.IntVar(&parallel, "parallel", 0, "how many runs it does at a time; 0 is as many as there are processors")
	brokerFlags(c, &b)
	settable(c, "broker")
	return c
}

// workerName is what a replay calls this worker.
func workerName() string {
	host, err := os.Hostname()
	if err != nil {
		host = "unknown"
	}
	return fmt.Sprintf("%s:%d", host, os.Getpid())
}
