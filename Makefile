# Lapwing: everything a developer or CI runs.
#   make demo   the main job on the built-in demo machine
#   make test   everything CI runs; installs what it needs by apt when it is missing
SHELL      := /bin/bash
GO         ?= go
STATICCHECK = honnef.co/go/tools/cmd/staticcheck@v0.8.2
SHARED     ?= $(abspath ../shared)

.PHONY: field soak endure latency fleet demo test build check-format vet lint unit fuzz system bench bench-setup setup clean

build: bin/lapwing bin/lapwingd

.PHONY: bin/lapwing bin/lapwingd
bin/lapwing bin/lapwingd:
	CGO_ENABLED=0 $(GO) build -trimpath -o $@ ./cmd/$(@F)

# The demo needs Go only: the machine is modelled, the broker runs inside.
demo: bin/lapwing
	bin/lapwing demo --once --fast --out out/demo

test: setup check-format vet lint unit fuzz system
	@echo "all tests passed"

check-format:
	@bad=$$(gofmt -l $$(git ls-files '*.go' 2>/dev/null || find . -name '*.go')); \
	if [ -n "$$bad" ]; then echo "gofmt would change: $$bad"; exit 1; fi

vet:
	$(GO) vet ./...

lint:
	$(GO) run $(STATICCHECK) ./...

# -race needs cgo and a C compiler.
unit:
	CGO_ENABLED=1 LAPWING_SHARED="$(SHARED)" $(GO) test -race -timeout 20m ./...

# Each parser for some seconds; corpora of past findings run in unit. A count and not a time: on a busy machine the
# fuzzer takes the end of its time for a failure.
FUZZTIME ?= 30000x
fuzz:
	@set -e; for p in $$($(GO) list ./...); do \
	  for f in $$($(GO) test -list '^Fuzz' $$p 2>/dev/null | grep '^Fuzz' || true); do \
	    echo "fuzz $$p $$f"; $(GO) test -run '^$$' -fuzz "^$$f$$" -fuzztime $(FUZZTIME) -fuzzminimizetime 1x $$p; \
	  done; done

# The programs as their users run them: real broker, real clients, other programs opening what we wrote.
system: build out/strangers/.made
	LAPWING_SYSTEM=1 LAPWING_BIN="$(CURDIR)/bin" LAPWING_STRANGERS="$(CURDIR)/out/strangers" LAPWING_SHARED="$(SHARED)" $(GO) test -count=1 -timeout 15m ./cmd/... ./internal/panel

# Programs of others that open what ours write, from the npm registry.
STRANGERS := @duckdb/node-api@1.5.6-r.1 sparkplug-payload@1.0.3 ajv@8.20.0 ajv-formats@3.0.1 axe-core@4.14.1
out/strangers/.made: Makefile
	mkdir -p out/strangers
	npm install --prefix out/strangers --no-save --no-package-lock --no-audit --no-fund --loglevel=error $(STRANGERS)
	touch $@

# The whole field on the model, ten minutes, with tables: windows against the truth, healthy walks, every fault.
field:
	LAPWING_FIELD=long $(GO) test -count=1 -timeout 40m -v -run TestField ./internal/station

# The soak on the model: healthy machines under random load for false alarms, growing faults for what is found and when,
# faults of sensors for what is not blamed on valves. Each machine can be run alone:
#   make soak SEED=3 MACHINES=1 TURNS=10000      make soak SOAK=faults SEED=1 RUNS=3 FAULT=rings      make soak SOAK=sensors
SOAK     ?= healthy
SEED     ?= 1
MACHINES ?= 10
TURNS    ?= 10000
RUNS     ?= 3
soak:
	LAPWING_SOAK=$(SOAK) SEED=$(SEED) MACHINES=$(MACHINES) TURNS=$(TURNS) RUNS=$(RUNS) FAULT="$(FAULT)" LOAD="$(LOAD)" \
	  nice -n 19 $(GO) test -count=1 -timeout 12h -v -run '^TestSoak' ./internal/station

# The way to the control room, for a long time and for many. Opt-in; loopback only. endure: 200 troubles of broker,
# network and daemon, and a day without a broker. latency: from the turn to the message. fleet: the uplinks of 500 skids
# against one mosquitto and against three nats-servers, which are built into out/fleet and are in nobody's go.mod.
endure: build
	LAPWING_ENDURE=200 LAPWING_SYSTEM=1 LAPWING_BIN="$(CURDIR)/bin" $(GO) test -count=1 -timeout 30m -v -run 'TestSystemEndurance|TestSystemBrokerAway' ./cmd/lapwingd

latency:
	LAPWING_LATENCY=100s $(GO) test -count=1 -timeout 10m -v -run TestLatency ./internal/station

NATS := github.com/nats-io/nats-server/v2@v2.15.3
fleet: out/fleet/nats-server
	$(GO) run ./testdata/fleet -skids 500
	$(GO) run ./testdata/fleet -skids 500 -broker nats -nats out/fleet/nats-server -every 8s

out/fleet/nats-server:
	GOBIN="$(CURDIR)/out/fleet" $(GO) install $(NATS)

# Figures, never a test: every room's benchmarks; the line stage by stage; the line against scipy in one run.
PYTHON  ?= /usr/bin/python3
BENCHED := model-17 synthetic-5 synthetic-17 synthetic-33
bench: bin/lapwing $(BENCHED:%=out/bench/%.wav)
	$(GO) test -run '^$$' -bench . -benchmem $$($(GO) list ./internal/... | grep -v /station$$)
	GOMAXPROCS=1 $(GO) test -run '^$$' -bench Line -benchtime 3x ./internal/station
	@if $(PYTHON) -c 'import numpy, scipy' 2>/dev/null; then \
	  $(PYTHON) testdata/bench/compare.py bin/lapwing out/bench --yardstick "$(SHARED)/peer/scipy_line.py"; \
	else echo "no numpy and scipy for $(PYTHON), so no comparison: make bench-setup installs them"; fi

out/bench/%.wav: testdata/bench/record/main.go
	$(GO) run ./testdata/bench/record -kind $(word 1,$(subst -, ,$*)) -channels $(word 2,$(subst -, ,$*)) -out $@

# Only the comparison of make bench needs this.
bench-setup:
	apt-get install -y -q --no-install-recommends python3-scipy

# Tools that the tests need and a plain Debian with Go, make and git has not.
NEED := gcc:gcc mosquitto:mosquitto mosquitto_sub:mosquitto-clients soxi:sox node:nodejs npm:npm chromium:chromium arecord:alsa-utils
setup:
	@missing=""; for n in $(NEED); do \
	  PATH="$$PATH:/usr/sbin" command -v $${n%%:*} >/dev/null 2>&1 || missing="$$missing $${n##*:}"; done; \
	/usr/bin/python3 -c 'import pymodbus.client' >/dev/null 2>&1 || missing="$$missing python3-pymodbus python3-serial-asyncio"; \
	echo '#include <stdlib.h>' | gcc -E - >/dev/null 2>&1 || missing="$$missing libc6-dev"; \
	[ -s /etc/ssl/certs/ca-certificates.crt ] || missing="$$missing ca-certificates"; \
	if [ -n "$$missing" ]; then \
	  if [ "$$(id -u)" = 0 ]; then as=""; elif command -v sudo >/dev/null 2>&1; then as="sudo"; \
	  else echo "missing:$$missing. Run as root, or install sudo, or: apt-get install$$missing"; exit 1; fi; \
	  command -v apt-get >/dev/null 2>&1 || { echo "missing:$$missing, and there is no apt-get here: install them by hand"; exit 1; }; \
	  echo "installing:$$missing"; \
	  $$as apt-get update -q >/dev/null && DEBIAN_FRONTEND=noninteractive $$as apt-get install -y -q --no-install-recommends $$missing >/dev/null \
	    || { echo "could not install:$$missing"; exit 1; }; fi
	@command -v $(GO) >/dev/null || { echo "no Go here: install Go 1.26 or newer"; exit 1; }

clean:
	rm -rf bin out
