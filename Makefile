# lapgate: build, test and demonstrate. Every target that needs outside packages runs
# deps first; on Debian 12 that installs what is missing through apt.

SHELL   := /bin/bash
TAGS    := gocv_specific_modules
export GOFLAGS := $(strip $(filter-out -tags=%,$(shell go env GOFLAGS 2>/dev/null)) -trimpath -tags=$(TAGS))

VERSION := 0.1.0
COMMIT  := $(shell git rev-parse --short=12 HEAD 2>/dev/null || echo unknown)
LDFLAGS := -X main.version=$(VERSION) -X main.commit=$(COMMIT)
DATA    ?= $(firstword $(wildcard ../shared/data ../../shared/data))

.PHONY: all deps deps-check build test race fuzz arm64 demo bench bench-short compare spoil evaluate crosscheck lint gen clean

all: build

deps: ## install what is missing (Debian 12) and check the Go version
	@.ci/deps

build: deps
	@mkdir -p build
	go build -ldflags '$(LDFLAGS)' -o build/lapgated ./cmd/lapgated
	go build -ldflags '$(LDFLAGS)' -o build/lapgate-stage ./cmd/stage
	CGO_ENABLED=0 go build -ldflags '$(LDFLAGS)' -o build/lapgate ./cmd/lapgate
	CGO_ENABLED=0 GOOS=windows GOARCH=amd64 go build -ldflags '$(LDFLAGS)' -o build/lapgate.exe ./cmd/lapgate

test: build
	go test ./...

race: deps ## where goroutines share something; kernels and the volume plan do not
	go test -race -short -skip Volume ./pipeline ./server ./server/intake ./server/images ./server/masters ./configs ./cmd/lapgate/...

fuzz: deps ## every fuzz target for FUZZTIME
	@.ci/fuzz $(or $(FUZZTIME),5s)

arm64: ## the C kernels built for arm64, under qemu: the same bits as here; ALL=1: the Go tests around them as well
	@.ci/deps gcc-aarch64-linux-gnu libc6-dev-arm64-cross qemu-user-static
	go test -count=1 -v -run '^TestSameBitsOnArm64$$' ./pipeline/raster/fused ./pipeline/raster/lines
	$(if $(ALL),CGO_ENABLED=1 GOARCH=arm64 CC=aarch64-linux-gnu-gcc go test -short -exec 'qemu-aarch64-static -L /usr/aarch64-linux-gnu' ./pipeline/raster/fused ./pipeline/raster/lines)

demo: build ## the main job with embedded defaults; ONCE=1 stops after the report, UNITS=n shows fewer
	build/lapgated demo --client build/lapgate --dir build/demo $(if $(ONCE),--once --report build/demo.json) $(if $(UNITS),--units $(UNITS))

bench: build ## fails where a figure that must be reached is missed three times
	go run ./cmd/bench --out build/bench.json

bench-short: build ## the figures with goals, in a minute or so; reports what is missed and does not fail
	go run ./cmd/bench --short --out build/bench-short.json

compare: ## the detection job with general libraries in Python, in turns; ARGS=--json
	@.ci/deps python3-opencv
	go run ./cmd/bench compare $(ARGS)

spoil: deps ## what becomes of units that must not be accepted
	go run ./cmd/spoil --out build/spoil.json

evaluate: build
	go run ./cmd/evaluate --data '$(DATA)' --out build/evaluate.json

crosscheck: deps
	@mkdir -p build/crosscheck
	go run ./cmd/crosscheck build/crosscheck
	/usr/bin/python3 testdata/crosscheck/crosscheck.py build/crosscheck

lint: deps
	@test -z "$$(gofmt -l $$(git ls-files '*.go'))" || { echo 'not gofmt-clean:'; gofmt -l $$(git ls-files '*.go'); exit 1; }
	go vet ./...
	go tool -modfile=proto/tools/go.mod staticcheck -tags=$(TAGS) ./...
	cd proto && go tool -modfile=tools/buf/go.mod buf lint

gen: ## generated code from the .proto files
	cd proto && go tool -modfile=tools/buf/go.mod buf generate
	protoc --python_out=plugins/outside/python -I proto/stagepb stage.proto # Debian's protobuf-compiler

clean:
	rm -rf build
