# Everything that is done to mirrorloom, by name. Go and Debian's apt are all
# that a fresh machine needs: what else is used installs itself.

GO ?= go
STATICCHECK := honnef.co/go/tools/cmd/staticcheck@v0.8.2
# Debian's packages that the cross-checks run: chromium prints the night sheet, poppler
# counts its pages.
PACKAGES := python3-numpy python3-scipy python3-astropy python3-pil python3-yaml python3-astroscrappy libopenblas0-pthread fitsverify netpbm chromium poppler-utils
COMMANDS := fitsverify pngtopnm chromium pdfinfo pdffonts pdftoppm

.PHONY: all build demo test lint bench validate packages

all: build

build:
	$(GO) build -o bin/mirrorloom ./cmd/mirrorloom

# The main job, on an invented field.
demo: build
	bin/mirrorloom demo -o demo --replace

test: packages
	$(GO) test -timeout 20m ./...
	$(GO) test -tags noasm ./hadamard

lint:
	@unformatted=$$(gofmt -l .); if [ -n "$$unformatted" ]; then echo "gofmt would change: $$unformatted"; exit 1; fi
	$(GO) mod verify
	$(GO) vet ./...
	GOARCH=arm64 $(GO) vet ./...
	$(GO) vet -tags noasm ./hadamard
	$(GO) run $(STATICCHECK) ./...
	cd hadamard/internal/gen && $(GO) vet ./... && $(GO) run $(STATICCHECK) ./...

# Long statistical checks: writes VALIDATION.md.
validate: build packages
	$(GO) run ./internal/validate
	MIRRORLOOM_VALIDATE=1 $(GO) test -count=1 -timeout 60m -run 'TestArcNights|TestSpeedOfLargestDevice|TestSheetsPrint' ./pipeline/reduce ./pipeline/sequence ./pipeline/nightsheet

# Figures are compared as ratios within one run, as machines are noisy: writes
# BENCHMARKS.md. One section alone: go run ./internal/bench -only memory.
bench: build packages
	$(GO) run ./internal/bench

# The cross-checks skip where neither the packages nor apt are there (and fail
# under CI=true), so a machine without apt still runs everything else.
packages:
	@if /usr/bin/python3 -c 'import numpy, scipy, astropy, PIL, yaml, astroscrappy' 2>/dev/null && which $(COMMANDS) >/dev/null; then :; \
	elif ! command -v apt-get >/dev/null; then echo "no apt-get: external cross-checks will be skipped"; \
	elif [ "$$(id -u)" != 0 ]; then echo "external cross-checks need, once: sudo apt-get install $(PACKAGES)"; \
	else apt-get update -q && DEBIAN_FRONTEND=noninteractive apt-get install -y -q --no-install-recommends $(PACKAGES); fi
