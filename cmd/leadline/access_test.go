package main

import (
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"leadline/fixtures/credentials"
)

// TestGuardedServer: the program itself, encrypted and with tokens and client
// certificates, is fed by a vehicle and asked by a dispatcher; clients in every
// language reach it; whoever shows nothing, or speaks in the clear, is told so.
func TestGuardedServer(t *testing.T) {
	t.Parallel()
	folder := t.TempDir()
	town, drive := compiledTown(t, folder, 10)
	ca, issuer := credentials.NewAuthority(t), credentials.NewIssuer(t, "k")
	caFile := ca.File(t, filepath.Join(folder, "ca.pem"))
	server := ca.Server(t, folder, "fleet.example")
	file := func(name, text string) string {
		path := filepath.Join(folder, name)
		if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
		return path
	}
	keys := file("keys.json", string(issuer.Keys(t)))
	token := func(name string, roles ...string) string {
		return issuer.Token(t, map[string]any{"iss": "https://issuer.example", "aud": "leadline", "sub": name, "groups": roles, "exp": time.Now().Add(time.Hour).Unix()})
	}
	srv := serveMaps(t, "--map", town, "--tls-cert", server.Certificate, "--tls-key", server.Key, "--client-ca", caFile,
		"--token-issuer", "https://issuer.example", "--token-audience", "leadline", "--token-keys", keys, "--token-roles", "groups")
	const vehicle = "van"
	own := ca.Client(t, t.TempDir(), time.Now().Add(time.Hour), "leadline://vehicle/"+vehicle)
	anna := file("anna.token", token("anna", "dispatcher")+"\n")

	good(t, "feed", drive, "--to", srv.address, "--ca", caFile, "--cert", own.Certificate, "--key", own.Key)
	asked := []string{"where", vehicle, "--at", srv.address, "--ca", caFile}
	if out := good(t, append(asked, "--token-file", anna)...); !strings.Contains(out, vehicle) {
		t.Errorf("the dispatcher is told %s", out)
	}
	if out := good(t, "follow", vehicle, "--at", srv.address, "--ca", caFile, "--cert", own.Certificate, "--key", own.Key, "--count", "1"); !strings.Contains(out, vehicle) {
		t.Errorf("the vehicle follows itself: %s", out)
	}
	bad(t, []string{"NO_IDENTITY", "client certificate"}, asked...)
	bad(t, []string{"NOT_ALLOWED", "administrator"}, append(asked, "--token-file", file("root.token", token("root", "administrator")))...)
	bad(t, []string{"BAD_IDENTITY", "no role"}, append(asked, "--token-file", file("none.token", token("anna")))...)
	bad(t, []string{"no answer"}, "where", vehicle, "--at", srv.address)                                        // in the clear
	bad(t, []string{"no answer", "certificate"}, "where", vehicle, "--at", srv.address, "--tls")                // of no authority of the system's
	bad(t, []string{"no such file"}, "where", vehicle, "--at", srv.address, "--ca", filepath.Join(folder, "x")) // before anything is sent
	bad(t, []string{"in the clear"}, "where", vehicle, "--at", "fleet.example:7700", "--token-file", anna)

	for language, run := range map[string]func(*testing.T) *exec.Cmd{
		"Python": func(t *testing.T) *exec.Cmd {
			c := exec.Command(python(t), "-c", `import leadline, os
with leadline.Client(os.environ["AT"], ca=os.environ["CA"], token=lambda: os.environ["TOKEN"]) as c:
    print(c.where(os.environ["VEHICLE"]).answers[0].posterior.status)`)
			c.Env = append(os.Environ(), "PYTHONPATH="+pythonClient)
			return c
		},
		"Node": func(t *testing.T) *exec.Cmd {
			c := exec.Command(node(t), "--input-type=module", "-e", `import { readFileSync } from "node:fs";
import { connect } from "./node.js";
const client = connect(process.env.AT, { ca: readFileSync(process.env.CA, "utf8"), token: () => process.env.TOKEN });
console.log((await client.where([process.env.VEHICLE])).answers[0].posterior.status);
client.close();`)
			c.Dir = webClient
			c.Env = os.Environ()
			return c
		},
	} {
		t.Run(language, func(t *testing.T) {
			c := run(t)
			c.Env = append(c.Env, "AT="+srv.address, "CA="+caFile, "VEHICLE="+vehicle, "TOKEN="+token("anna", "analyst"))
			if out, err := c.CombinedOutput(); err != nil || len(strings.TrimSpace(string(out))) != 1 {
				t.Errorf("%v: %s", err, out)
			}
		})
	}
	if srv.stop(t); strings.Contains(srv.log.String(), token("anna")[:30]) {
		t.Errorf("the log holds a token: %s", srv.log)
	}
}

// TestGuardFlags: what does not go together, or would leave positions to
// whoever reaches the port, is said before a map is opened.
func TestGuardFlags(t *testing.T) {
	t.Parallel()
	folder := t.TempDir()
	pair := credentials.NewAuthority(t).Server(t, folder, "fleet.example")
	secure := []string{"--tls-cert", pair.Certificate, "--tls-key", pair.Key}
	for what, c := range map[string]struct {
		args  []string
		words []string
	}{
		"one of two files":      {[]string{"--tls-cert", pair.Certificate}, []string{"give both"}},
		"clients in the clear":  {[]string{"--client-ca", pair.Certificate}, []string{"goes with --tls-cert"}},
		"an audience alone":     {[]string{"--token-audience", "a"}, []string{"--token-issuer is missing"}},
		"an issuer alone":       {[]string{"--token-issuer", "https://i.example"}, []string{"--token-audience is missing"}},
		"plain text to all":     {[]string{"--listen", "0.0.0.0:0"}, []string{"neither encrypted", "--plain-text-beyond-loopback"}},
		"everybody may do all":  {append(secure, "--listen", "0.0.0.0:0"), []string{"--without-login-beyond-loopback"}},
		"plain text with login": {[]string{"--listen", "0.0.0.0:0", "--token-issuer", "https://i.example", "--token-audience", "a"}, []string{"neither encrypted"}},
	} {
		t.Run(what, func(t *testing.T) { bad(t, c.words, append([]string{"serve", "--map", "none"}, c.args...)...) })
	}
	town, _ := compiledTown(t, folder, 1)
	bad(t, []string{"--tls-cert", "no such file"}, "serve", "--map", town, "--tls-cert", "none", "--tls-key", "none")
	bad(t, []string{"--token-keys", "no such file"}, "serve", "--map", town, "--token-issuer", "i", "--token-audience", "a", "--token-keys", "none")
	bad(t, []string{"by https"}, "serve", "--map", town, "--token-issuer", "http://i.example", "--token-audience", "a")
}
