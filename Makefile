# Epitally. `make help` lists the targets.
SHELL := /bin/bash
VERSION := $(shell git describe --tags --always --dirty 2>/dev/null || echo development)
DEMO_DATA ?= .data/demo
LISTEN ?= 127.0.0.1:8620
FUZZ_TIME ?= 60s

.PHONY: help demo test bench soak build run lint clean prerequisites

help: ## print this list
	@grep -hE '^[a-z-]+:.*## ' $(MAKEFILE_LIST) | awk -F ':.*## ' '{printf "  make %-8s %s\n", $$1, $$2}'

demo: build ## grow an invented fab, load it and serve its pages on LISTEN
	bin/epitally demo --data $(DEMO_DATA) --listen $(LISTEN)

test: web/dist/.built ## run every test (starts its own PostgreSQL and Chromium)
	@.ci/prerequisites test
	npm test --prefix web --silent
	go test -timeout 9m ./...

bench: build ## print the table of measured figures against their goals
	@.ci/prerequisites test
	go run ./cmd/bench

soak: web/dist/.built ## the long forms: race detector, then every fuzz target for FUZZ_TIME
	@.ci/prerequisites test
	go test -race -timeout 60m ./...
	@set -e; for package in $$(go list ./...); do \
		for target in $$(go test -list '^Fuzz' $$package | grep '^Fuzz' || true); do \
			echo "$$package $$target"; go test -run '^$$' -fuzz "^$$target$$" -fuzztime $(FUZZ_TIME) $$package; \
		done; \
	done

build: bin/epitally ## build bin/epitally

bin/epitally: prerequisites web/dist/.built FORCE
	go build -trimpath -ldflags "-X main.version=$(VERSION)" -o $@ ./cmd/epitally

prerequisites:
	@.ci/prerequisites build

web/node_modules/.installed: web/package.json web/package-lock.json
	@.ci/prerequisites build
	npm ci --prefix web --silent --no-audit --no-fund
	@touch $@

web/dist/.built: web/node_modules/.installed $(wildcard web/scripts/*.js web/scripts/*.mjs web/styles/*)
	npm run build --prefix web --silent
	@touch $@

run: build ## serve with the default data folder
	bin/epitally serve --listen $(LISTEN)

lint: web/dist/.built ## gofmt, vet, staticcheck, migration numbers, paths named in the documents
	.ci/lint

clean: ## remove what was built, and the demo's data
	rm -rf bin web/dist/* web/dist/.built web/node_modules $(DEMO_DATA)

FORCE:
