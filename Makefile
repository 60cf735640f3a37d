# Tautwire: `make run` plays, `make test` tests. `make help` lists the rest.

SHELL := /bin/bash
.SHELLFLAGS := -euo pipefail -c

# All but the end-to-end tests, which play in real time and so run alone and last.
RACE := ./config/... ./engine/... ./midiin/... ./voice/...
FUZZTIME ?= 10s
GO ?= go

.PHONY: help run build test race bench fuzz stage

help:
	@echo 'make run    install what is missing, build, and play (the demo where there is no sound device)'
	@echo 'make build  build ./tautwire'
	@echo 'make test   install what is missing, then vet, all tests, and the tests under the race detector'
	@echo 'make stage  the virtual stage: a keyboard and an audio interface in a virtual machine'
	@echo 'make race   only the tests under the race detector'
	@echo 'make bench  benchmarks'
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
	$(GO) test -race $(RACE)
	$(GO) test $(RACE)
	$(GO) test ./cmd/...

race:
	@.ci/needs build
	$(GO) test -race $(RACE)

bench:
	@.ci/needs build
	$(GO) test -run '^$$' -bench . ./...

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
