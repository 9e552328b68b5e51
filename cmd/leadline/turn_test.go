package main

import (
	"fmt"
	"net"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"testing"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	leadlinev1 "leadline/proto/leadline/v1"
)

// halves are two servers that share a drive; the one to which it comes first is cut off
// from then on after some batches.
type halves struct {
	mu    sync.Mutex
	first *half
	have  uint64
	took  map[*half]int
}

type half struct {
	leadlinev1.UnimplementedPositionServiceServer
	of *halves
}

const cutAfterBatches = 3

func (h *half) cutOff() error {
	h.of.mu.Lock()
	defer h.of.mu.Unlock()
	if h.of.first != h || h.of.have < cutAfterBatches {
		return nil
	}
	st, err := status.New(codes.Unavailable, "this server is cut off: call another one").WithDetails(
		&errdetails.ErrorInfo{Reason: "RECOVERING", Domain: "leadline.v1", Metadata: map[string]string{"server": "cut off"}})
	if err != nil {
		return err
	}
	return st.Err()
}

func (h *half) Feed(st grpc.BidiStreamingServer[leadlinev1.FeedRequest, leadlinev1.FeedResponse]) error {
	for {
		m, err := st.Recv()
		if err != nil {
			return nil //nolint:nilerr // the client has gone
		}
		if err := h.cutOff(); err != nil {
			return err
		}
		h.of.mu.Lock()
		var out *leadlinev1.FeedResponse
		switch {
		case m.GetOpen() != nil:
			if h.of.first == nil {
				h.of.first = h
			}
			out = &leadlinev1.FeedResponse{Message: &leadlinev1.FeedResponse_Opened{Opened: &leadlinev1.Opened{Sequence: h.of.have, MaxBatch: 64, MaxMessageBytes: 1 << 20}}}
		case m.GetBatch() != nil:
			if n := m.GetBatch().GetSequence(); n != h.of.have+1 {
				err = fmt.Errorf("batch %d comes after %d", n, h.of.have)
			}
			h.of.have++
			h.of.took[h]++
			out = &leadlinev1.FeedResponse{Message: &leadlinev1.FeedResponse_Receipt{Receipt: &leadlinev1.Receipt{Sequence: h.of.have, Durable: true}}}
		default:
			out = &leadlinev1.FeedResponse{Message: &leadlinev1.FeedResponse_Closed{Closed: &leadlinev1.Closed{Accepted: h.of.have}}}
		}
		h.of.mu.Unlock()
		if err != nil {
			return err
		}
		if err := st.Send(out); err != nil {
			return err
		}
	}
}

const pythonTurns = `
import sys, leadline
with leadline.Client(sys.argv[1]) as client, client.open({"vehicle": "v", "map": "m"}) as drive:
    for _ in range(6):
        drive.send([{"time": "2030-05-01T12:00:15Z", "measurement": {"fix": {"lon": 1, "lat": 2, "sigma_m": 5}}}])
    print(drive.end().accepted)
`

const nodeTurns = `
import { connect } from "./node.js";
const client = connect(process.argv[2]);
const drive = await client.open({ vehicle: "v", map: "m" });
for (let i = 0; i < 6; i++) await drive.send([{ time: "2030-05-01T12:00:15Z", measurement: { fix: { lon: 1, lat: 2, sigma_m: 5 } } }]);
console.log(String((await drive.end()).accepted));
client.close();
`

// TestOtherClientsTurn proves that the clients in other languages go on at another
// server when one says that it is cut off, without gap or double.
func TestOtherClientsTurn(t *testing.T) {
	for name, command := range map[string]func(t *testing.T, addresses string) *exec.Cmd{
		"Python": func(t *testing.T, addresses string) *exec.Cmd {
			cmd := exec.Command(python(t), "-c", pythonTurns, addresses)
			cmd.Env = append(os.Environ(), "PYTHONPATH="+pythonClient)
			return cmd
		},
		"Node": func(t *testing.T, addresses string) *exec.Cmd {
			program := node(t)
			script := filepath.Join(webClient, "turns-test.mjs") // where the packages are found
			if err := os.WriteFile(script, []byte(nodeTurns), 0o600); err != nil {
				t.Fatal(err)
			}
			t.Cleanup(func() { os.Remove(script) })
			return exec.Command(program, script, addresses)
		},
	} {
		t.Run(name, func(t *testing.T) {
			of := &halves{took: map[*half]int{}}
			var addresses []string
			for range 2 {
				l, err := net.Listen("tcp", "127.0.0.1:0")
				if err != nil {
					t.Fatal(err)
				}
				s := grpc.NewServer()
				leadlinev1.RegisterPositionServiceServer(s, &half{of: of})
				go func() { _ = s.Serve(l) }() // until it is stopped
				t.Cleanup(s.Stop)
				addresses = append(addresses, l.Addr().String())
			}
			out, err := command(t, strings.Join(addresses, ",")).CombinedOutput()
			if err != nil || strings.TrimSpace(string(out)) != "6" {
				t.Fatalf("%v: %s", err, out)
			}
			if of.took[of.first] != cutAfterBatches || len(of.took) != 2 {
				t.Errorf("the servers took %v", of.took)
			}
		})
	}
}
