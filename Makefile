# What a contributor types. `make test` is the whole check; .ci/run runs it on
# a fresh machine.

GO  ?= go
DIR ?= .

.PHONY: test format vet unit portable race cross bits fused demo build bench

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

# The main job from start to end on the invented table; DEMO names the folder.
demo:
	$(GO) run ./cmd/holdfast demo $(DEMO)

build:
	$(GO) build -o holdfast ./cmd/holdfast

bench:
	$(GO) test -run '^$$' -bench . -benchmem ./...
