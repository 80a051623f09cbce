# What a contributor types. `make test` is the whole check; .ci/run runs it on
# a fresh machine.

GO  ?= go
DIR ?= .

.PHONY: test format vet unit portable race cross bits fused crash slurm demo build release bench

test: format vet unit portable race cross bits fused

# Fails where gofmt would change a file, where a file cannot be parsed, and
# where gofmt itself is missing. DIR=folder looks at another folder.
format:
	@changed=$$("$$($(GO) env GOROOT)/bin/gofmt" -l "$(DIR)") || exit 1; \
	if [ -n "$$changed" ]; then echo "gofmt would change:"; echo "$$changed"; exit 1; fi

vet:
	$(GO) vet ./...

# Fuzz targets run on their seeds here.
unit:
	$(GO) test ./...

# The portable kernels, without assembly.
portable:
	$(GO) vet -tags purego ./solver/...
	$(GO) test -tags purego ./solver/...

# The race detector needs a C compiler. It is run where goroutines meet.
race:
	CGO_ENABLED=1 $(GO) test -race ./resample

# Build tags for systems that the tests do not run on.
cross:
	GOOS=darwin GOARCH=arm64 $(GO) vet ./resample ./selection ./solver/...

# The same bits on other instruction sets of this architecture.
bits:
	.ci/bits

# Products and additions that the compiler fuses on some processors only.
fused:
	.ci/fused ./solver/... ./selection ./resample ./io/...

# Kills the real program at 200 random moments and holds what goes on to the
# bytes of an undisturbed run; `make unit` does 12.
crash:
	$(GO) test -count=1 -v -timeout 60m -run '^TestCrash$$' ./cmd/holdfast -crashes 200

# Deals a run out over a real Slurm that is started on this machine: as root,
# with Debian's slurm-wlm and munge. Five minutes, mostly waiting.
slurm:
	testdata/slurm/test

# The main job from start to end on the invented table; DEMO names the folder.
demo:
	$(GO) run ./cmd/holdfast demo $(DEMO)

build:
	$(GO) build -o holdfast ./cmd/holdfast

# Static programs with checksums in dist/, for the revision that is checked out.
VERSION ?= $(shell git describe --tags --always --dirty)
release:
	rm -rf dist && mkdir dist
	for arch in amd64 arm64; do \
	  CGO_ENABLED=0 GOOS=linux GOARCH=$$arch $(GO) build -trimpath -ldflags "-s -w -X main.release=$(VERSION)" \
	    -o dist/holdfast-linux-$$arch ./cmd/holdfast || exit 1; \
	done
	cd dist && sha256sum holdfast-linux-* >SHA256SUMS && sha256sum -c SHA256SUMS

bench:
	$(GO) test -run '^$$' -bench . -benchmem ./...
