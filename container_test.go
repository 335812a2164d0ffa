package main

import (
	"os"
	"regexp"
	"strings"
	"testing"

	"github.com/goccy/go-yaml"
)

// No container engine is needed to see that the files say what the README promises.

func TestComposeKeepsItsPromises(t *testing.T) {
	b, err := os.ReadFile("docker-compose.yml")
	if err != nil {
		t.Fatal(err)
	}
	var file struct {
		Services map[string]struct {
			Build    string
			Ports    []string
			Volumes  []string
			ReadOnly bool     `yaml:"read_only"`
			CapDrop  []string `yaml:"cap_drop"`
		}
		Volumes map[string]any
	}
	if err := yaml.Unmarshal(b, &file); err != nil {
		t.Fatal(err)
	}
	s, ok := file.Services["evenshelf"]
	if !ok || s.Build != "." || !s.ReadOnly || len(s.CapDrop) == 0 {
		t.Errorf("the service is %+v", s)
	}
	for _, port := range s.Ports {
		if !strings.HasPrefix(port, "127.0.0.1:") {
			t.Errorf("port %s is published beyond this machine, and there is no sign-in", port)
		}
	}
	for _, v := range s.Volumes {
		name, _, _ := strings.Cut(v, ":")
		if _, ours := file.Volumes[name]; !ours && !strings.HasSuffix(v, ":ro") {
			t.Errorf("%s can be written to: shelves are mounted read-only", v)
		}
	}
	if len(s.Ports) == 0 || len(s.Volumes) < 2 {
		t.Errorf("ports %v, volumes %v", s.Ports, s.Volumes)
	}
}

func TestDockerfileKeepsItsPromises(t *testing.T) {
	text, err := os.ReadFile("Dockerfile")
	if err != nil {
		t.Fatal(err)
	}
	lines := regexp.MustCompile(`\\\n\s*`).ReplaceAllString(string(text), "")
	var stages, user, health int
	last := map[string]string{}
	for line := range strings.Lines(lines) {
		word, rest, _ := strings.Cut(strings.TrimSpace(line), " ")
		switch word {
		case "", "#":
		case "FROM":
			stages++
			user, health = 0, 0
		case "USER":
			if rest != "root" && rest != "0" {
				user++
			}
		case "HEALTHCHECK":
			health++
		case "RUN", "COPY", "WORKDIR", "ENV", "VOLUME", "EXPOSE", "ENTRYPOINT", "CMD", "ARG":
		default:
			t.Errorf("%q is no instruction", line)
		}
		last[word] = rest
	}
	if stages != 2 || user != 1 || health != 1 {
		t.Errorf("%d stages; the last has %d ordinary users and %d health checks", stages, user, health)
	}
	if last["ENTRYPOINT"] != `["evenshelf"]` || last["CMD"] != `["serve"]` {
		t.Errorf("it starts %s %s", last["ENTRYPOINT"], last["CMD"])
	}
	mod, err := os.ReadFile("go.mod")
	if err != nil {
		t.Fatal(err)
	}
	version := regexp.MustCompile(`(?m)^go (\d+\.\d+)`).FindSubmatch(mod)
	if version == nil || !strings.Contains(lines, "FROM golang:"+string(version[1])+"-") {
		t.Errorf("go.mod asks for Go %s, the Dockerfile for another", version)
	}
}
