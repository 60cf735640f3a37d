# Tautwire: `make run` plays, `make test` tests. `make help` lists the rest.

SHELL := /bin/bash
.SHELLFLAGS := -euo pipefail -c

# All but the end-to-end tests, which play in real time and so run alone and last.
ROOMS := ./config/... ./engine/... ./midiin/... ./voice/...

# The rooms where goroutines meet. Of voice, which has none of its own, only what
# several may share: its measurements take minutes under the detector. The PortAudio
# binding passes a number as a pointer, which the detector's pointer check takes amiss.
RACE := ./config/... ./engine/... ./midiin/...
RACE_FLAGS := -race -short -gcflags=github.com/gordonklaus/portaudio=-d=checkptr=0
FUZZTIME ?= 10s
GO ?= go

.PHONY: help run build test race bench speed fuzz stage arm64

help:
	@echo 'make run    install what is missing, build, and play (the demo where there is no sound device)'
	@echo 'make build  build ./tautwire'
	@echo 'make test   install what is missing, then vet, all tests, and the tests under the race detector'
	@echo 'make stage  the virtual stage: a keyboard and an audio interface in a virtual machine'
	@echo 'make race   only the tests under the race detector'
	@echo 'make arm64  build ./tautwire-arm64 for a small board, and run the tests of strings and engine on it, emulated'
	@echo 'make bench  benchmarks'
	@echo 'make speed  install what is missing, then the bounds of speed against a control in C: prints a table, and fails where one does not hold'
	@echo 'make fuzz   every fuzz target for FUZZTIME=$(FUZZTIME)'

build:
	@.ci/needs build
	$(GO) build -o tautwire ./cmd/tautwire

run: build
	@if ./tautwire devices --check; then exec ./tautwire play; fi; \
	echo 'Playing the demo in silence instead, and into demo.wav for the ear.'; \
	./tautwire render --demo --out demo.wav; \
	exec ./tautwire play --demo --device null

test:
	@.ci/needs test
	$(GO) vet ./...
	$(GO) test $(RACE_FLAGS) $(RACE)
	$(GO) test $(RACE_FLAGS) -run 'Shared|Cuts' ./voice
	$(GO) test $(ROOMS)
	$(GO) test ./cmd/...

race:
	@.ci/needs build
	$(GO) test $(RACE_FLAGS) $(RACE)
	$(GO) test $(RACE_FLAGS) -run 'Shared|Cuts' ./voice

bench:
	@.ci/needs build
	$(GO) test -run '^$$' -bench . ./...

speed:
	@.ci/needs test
	$(GO) run ./.ci/speed

fuzz:
	@.ci/needs build
	@for package in $$($(GO) list ./...); do \
		for target in $$($(GO) test -list '^Fuzz' "$$package" | grep '^Fuzz' || true); do \
			echo "$$package $$target"; \
			$(GO) test -run '^$$' -fuzz "^$$target\$$" -fuzztime $(FUZZTIME) "$$package"; \
		done; \
	done

stage:
	@.ci/stage/run

# The strings and the engine are Go alone, so that their tests need no libraries.
ARM64 := GOARCH=arm64 $(if $(filter aarch64,$(shell uname -m)),,CC=aarch64-linux-gnu-gcc \
	PKG_CONFIG_LIBDIR=/usr/lib/aarch64-linux-gnu/pkgconfig:/usr/share/pkgconfig)
ON_ARM64 := $(if $(filter aarch64,$(shell uname -m)),,-exec qemu-aarch64)

arm64:
	@.ci/needs arm64
	$(ARM64) CGO_ENABLED=1 $(GO) build -o tautwire-arm64 ./cmd/tautwire
	$(if $(ON_ARM64),qemu-aarch64) ./tautwire-arm64 --version
	GOARCH=arm64 CGO_ENABLED=0 $(GO) vet ./voice/... ./engine
	GOARCH=arm64 CGO_ENABLED=0 $(GO) test $(ON_ARM64) -short -timeout 20m ./voice/lanes/... ./voice ./engine
