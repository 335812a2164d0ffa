# Evenshelf. 'make try' shows it at work, 'make test' proves it; both install what is missing on
# Debian and Ubuntu, or say exactly what to install.

GO ?= go
VERSION ?= $(shell git describe --tags --always --dirty 2>/dev/null || echo dev)
# tests of engine/media in which something is done at the same time; the others wait for FFmpeg or for arithmetic
SHARED = Child|Cancel|Stall|Kill|Limit|Endless|Audition|Seldom|DecodersAgree|Retag|Album
BUILD = $(GO) build -trimpath -ldflags '-s -w -X evenshelf/command.Version=$(VERSION)'

.PHONY: help build try test lint bench evaluation ratios fuzz clean

help: ## list the targets
	@grep -hE '^[a-z]+:.*##' $(MAKEFILE_LIST) | sed -E 's/:[^#]*## /\t/' | expand -t 12

build: ## build bin/evenshelf
	@scripts/need build
	$(BUILD) -o bin/evenshelf .

try: build ## make a demo shelf, level it, open the dashboard (ARGS=--once to end by itself)
	@scripts/need try
	bin/evenshelf try $(ARGS)

test: ## everything that has to pass: format, vet, lint, tests (with the race detector where time allows)
	@scripts/need test
	@test -z "$$(gofmt -l $$(git ls-files '*.go'))" || { echo "not gofmt-ed:"; gofmt -l $$(git ls-files '*.go'); exit 1; }
	$(GO) vet ./...
	$(GO) tool staticcheck ./...
	$(GO) test -race -timeout 12m $$($(GO) list ./... | grep -v '/engine/media$$')
	$(GO) test -race -timeout 12m -run '$(SHARED)' ./engine/media
	@# tests of the whole program, of formats and of long signals, which the race detector would make minutes longer
	$(GO) test -timeout 15m ./engine/level ./engine/media ./command ./engine/demo ./engine/faults ./engine/meter ./engine/speech ./worker/delivery

bench: ## run every benchmark (x-realtime is how much faster than listening)
	$(GO) test -run '^$$' -bench . -benchmem ./engine/...

evaluation: ## level composed programmes, measure what comes out, refresh engine/level/EVALUATION.md
	@scripts/need test
	$(GO) test ./engine/level -run Evaluation -count 1 -v -timeout 25m -args -update

ratios: build ## print what measuring and levelling cost, as ratios to FFmpeg from one run
	@scripts/need test
	scripts/ratios
	scripts/level-ratios

fuzz: ## run each fuzz target for a minute (PACKAGES=./engine/media for some of them)
	@GO=$(GO) scripts/fuzz 60s $(PACKAGES)

clean: ## remove what was built
	rm -rf bin
