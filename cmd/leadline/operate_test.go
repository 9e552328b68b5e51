package main

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"

	"github.com/goccy/go-yaml"
)

const operateDir = "../../docs/operate"

// manifests are the documents of the Kubernetes file, by kind.
func manifests(t *testing.T) map[string]map[string]any {
	t.Helper()
	text, err := os.ReadFile(filepath.Join(operateDir, "kubernetes.yaml"))
	if err != nil {
		t.Fatal(err)
	}
	out := map[string]map[string]any{}
	for d := yaml.NewDecoder(bytes.NewReader(text)); ; {
		var m map[string]any
		if err := d.Decode(&m); errors.Is(err, io.EOF) {
			return out
		} else if err != nil {
			t.Fatal(err)
		}
		out[fmt.Sprint(m["kind"])] = m
	}
}

// dig goes down by keys and indexes; what is not there fails the test.
func dig(t *testing.T, v any, path ...any) any {
	t.Helper()
	for i, p := range path {
		switch k := p.(type) {
		case string:
			m, ok := v.(map[string]any)
			if v = m[k]; !ok || v == nil {
				t.Fatalf("there is no %v", path[:i+1])
			}
		case int:
			l, ok := v.([]any)
			if !ok || k >= len(l) {
				t.Fatalf("there is no %v", path[:i+1])
			}
			v = l[k]
		}
	}
	return v
}

// fieldOf collects a field of a list's members.
func fieldOf(t *testing.T, list any, field string) (out []string) {
	t.Helper()
	for _, m := range list.([]any) {
		out = append(out, fmt.Sprint(dig(t, m, field)))
	}
	return out
}

// TestKubernetes proves that the manifests fit together: settings that serve
// takes, ports that it listens on, probes of paths that it has, selectors that
// select, files where the settings say, and room for the journal.
func TestKubernetes(t *testing.T) {
	m := manifests(t)
	for _, kind := range []string{"ConfigMap", "Service", "StatefulSet", "PodDisruptionBudget", "NetworkPolicy"} {
		if m[kind] == nil {
			t.Fatalf("there is no %s", kind)
		}
	}
	settings := fmt.Sprint(dig(t, m["ConfigMap"], "data", "leadline.yaml"))
	path := writeText(t, filepath.Join(t.TempDir(), "leadline.yaml"), settings)
	printed := good(t, "serve", "--config", path, "--print-config")
	setting := func(key string) string {
		match := regexp.MustCompile(`(?m)^` + key + `: *"?([^"#\s]+)"?`).FindStringSubmatch(printed)
		if match == nil {
			t.Fatalf("the settings have no %s:\n%s", key, printed)
		}
		return match[1]
	}
	pod := dig(t, m["StatefulSet"], "spec", "template")
	spec := dig(t, pod, "spec")
	box := dig(t, spec, "containers", 0)
	ports := map[string]string{}
	for _, p := range dig(t, box, "ports").([]any) {
		ports[fmt.Sprint(dig(t, p, "name"))] = fmt.Sprint(dig(t, p, "containerPort"))
	}
	if ":"+ports["api"] != strings.TrimPrefix(setting("listen"), "0.0.0.0") || ":"+ports["operator"] != strings.TrimPrefix(setting("operator_listen"), "0.0.0.0") {
		t.Errorf("the ports are %v, the settings say %s and %s", ports, setting("listen"), setting("operator_listen"))
	}
	for probe, want := range map[string]string{"startupProbe": "/live", "livenessProbe": "/live", "readinessProbe": "/ready"} {
		if get := dig(t, box, probe, "httpGet"); dig(t, get, "path") != want || dig(t, get, "port") != "operator" {
			t.Errorf("%s asks for %v", probe, get)
		}
	}
	labels := fmt.Sprint(dig(t, pod, "metadata", "labels"))
	for what, selector := range map[string]any{
		"Service": dig(t, m["Service"], "spec", "selector"), "StatefulSet": dig(t, m["StatefulSet"], "spec", "selector", "matchLabels"),
		"PodDisruptionBudget": dig(t, m["PodDisruptionBudget"], "spec", "selector", "matchLabels"), "NetworkPolicy": dig(t, m["NetworkPolicy"], "spec", "podSelector", "matchLabels"),
	} {
		if fmt.Sprint(selector) != labels {
			t.Errorf("%s selects %v, and the pod has %v", what, selector, labels)
		}
	}
	if fmt.Sprint(dig(t, m["StatefulSet"], "spec", "replicas")) != "1" || fmt.Sprint(dig(t, m["PodDisruptionBudget"], "spec", "minAvailable")) != "1" {
		t.Error("one server writes a journal: one replica, which stays")
	}
	mounts := fieldOf(t, dig(t, box, "volumeMounts"), "mountPath")
	for _, key := range []string{"data", "tls_cert", "tls_key", "client_ca"} {
		if f := setting(key); !slices.ContainsFunc(mounts, func(m string) bool { return f == m || strings.HasPrefix(f, m+"/") }) {
			t.Errorf("%s is %s, and mounted are %v", key, f, mounts)
		}
	}
	volumes := append(fieldOf(t, dig(t, spec, "volumes"), "name"), fmt.Sprint(dig(t, m["StatefulSet"], "spec", "volumeClaimTemplates", 0, "metadata", "name")))
	for _, name := range fieldOf(t, dig(t, box, "volumeMounts"), "name") {
		if !slices.Contains(volumes, name) {
			t.Errorf("%s is mounted and is no volume", name)
		}
	}
	for key, want := range map[string]any{"runAsNonRoot": true, "runAsUser": uint64(65532)} {
		if got := dig(t, spec, "securityContext", key); got != want {
			t.Errorf("%s is %v", key, got)
		}
	}
	if dig(t, box, "securityContext", "readOnlyRootFilesystem") != true || dig(t, box, "securityContext", "allowPrivilegeEscalation") != false {
		t.Error("the container may write, or become more")
	}
}

// TestContainerfile proves that the file's lines are instructions, that the image
// runs the program as nobody, with the folder that belongs to it, and that the
// program is built and begins as the file says.
func TestContainerfile(t *testing.T) {
	text, err := os.ReadFile(filepath.Join(operateDir, "Containerfile"))
	if err != nil {
		t.Fatal(err)
	}
	last := map[string]string{}
	for line := range strings.Lines(string(text)) {
		line = strings.TrimSpace(line)
		if line == "" || strings.HasPrefix(line, "#") {
			continue
		}
		word, rest, _ := strings.Cut(line, " ")
		if !slices.Contains([]string{"FROM", "WORKDIR", "COPY", "RUN", "USER", "VOLUME", "EXPOSE", "STOPSIGNAL", "ENTRYPOINT"}, word) || rest == "" {
			t.Errorf("%q is no instruction", line)
		}
		last[word] = rest
	}
	goMod, err := os.ReadFile("../../go.mod")
	if err != nil {
		t.Fatal(err)
	}
	version := regexp.MustCompile(`(?m)^go (\d+\.\d+)`).FindSubmatch(goMod)[1]
	if !strings.Contains(string(text), "golang:"+string(version)+"-") {
		t.Errorf("it is built with another Go than %s", version)
	}
	if last["FROM"] != "scratch" || last["USER"] != "65532:65532" || last["STOPSIGNAL"] != "SIGTERM" || !strings.Contains(last["RUN"], "CGO_ENABLED=0 go build") || !strings.Contains(last["RUN"], " ./cmd/leadline") {
		t.Errorf("the image is %v", last)
	}
	var entry []string
	if err := yaml.Unmarshal([]byte(last["ENTRYPOINT"]), &entry); err != nil || entry[0] != "/leadline" || entry[3] != last["VOLUME"] {
		t.Errorf("it begins with %v, %v, and keeps %s", entry, err, last["VOLUME"])
	}
	good(t, append(entry[1:], "--print-config")...)
}
