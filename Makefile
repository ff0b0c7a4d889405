# foldshade: build, demonstrate and test. `make help` lists the targets.

GO       ?= go
FUZZTIME ?= 20s

# A clone that belongs to another user has no version stamp; that is no reason
# to fail the build.
VCS := $(shell git -C '$(CURDIR)' status >/dev/null 2>&1 && echo auto || echo false)

# Vector code is an experiment of Go 1.26; without it, on another processor or
# with another Go, the portable code gives the same results, more slowly.
SIMD := $(shell GOEXPERIMENT=simd $(GO) list simd/archsimd >/dev/null 2>&1 && echo simd)
export GOEXPERIMENT = $(SIMD)

PURE := ./geometry/... ./dem ./mask/...

empty :=
comma := ,
space := $(empty) $(empty)

# What the race detector runs beside all of dem/raster: it costs a factor of
# ten, so of mask and the program the tests that share work among goroutines.
CONCURRENT := TestResultsDoNotDependOnTheCut TestLayersWritesEverything TestRepeats TestCalledOff

.PHONY: help setup build demo test check unit pure race bench fuzz clean

help:
	@echo 'make setup   install what the build needs and what is missing'
	@echo 'make build   bin/foldshade'
	@echo 'make demo    build, then the main job on an invented valley, in demo/'
	@echo 'make test    every check, in under ten minutes on two cores'
	@echo 'make bench   speed, against GDAL on the same machine'
	@echo 'make fuzz    every fuzz target for FUZZTIME=$(FUZZTIME)'
	@echo 'make clean   remove bin/ and demo/'

setup:
	@GO='$(GO)' .ci/setup

build: setup
	$(GO) build -buildvcs=$(VCS) -o bin/foldshade ./cmd/foldshade

demo: build
	bin/foldshade demo --out demo --overwrite

test: setup check unit pure race
	@echo 'make test: everything passed'

check:
	@unformatted=$$(gofmt -l cmd dem geometry mask); if [ -n "$$unformatted" ]; then \
		echo "gofmt would change:"; echo "$$unformatted"; exit 1; fi
	$(GO) vet ./...
	$(GO) tool staticcheck ./...

unit:
	$(GO) test ./...

# geometry, dem and mask serve programs that have no C compiler, and machines
# that have no vector code.
pure: export GOEXPERIMENT =
pure:
	CGO_ENABLED=0 $(GO) build $(PURE)
	CGO_ENABLED=0 $(GO) test $(PURE)

# The concurrent parts, with the race detector and the strict check of
# pointers passed to C.
race: export GOEXPERIMENT = $(if $(SIMD),$(SIMD)$(comma))cgocheck2
race:
	$(GO) test -race ./dem/raster/...
	$(GO) test -race -run '^($(subst $(space),|,$(CONCURRENT)))$$' ./mask ./cmd/foldshade

bench: setup
	$(GO) test -run '^$$' -bench . -benchmem ./...

fuzz: setup
	@for package in $$($(GO) list ./...); do \
		for target in $$($(GO) test -list '^Fuzz' $$package | grep '^Fuzz'); do \
			echo "$$package $$target"; \
			$(GO) test -run '^$$' -fuzz "^$$target\$$" -fuzztime $(FUZZTIME) $$package || exit 1; \
		done; \
	done

clean:
	rm -rf bin demo
