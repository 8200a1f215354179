# make demo   installs what is missing, builds, measures sample footage, says where the report is
# make test   installs what is missing, runs every test
# make check  formatting, vet and static analysis
# make build  bin/lodeswing
# make long   the full Monte Carlo runs behind the quick tests (tens of minutes)
# make bench  the speeds, each as a ratio within one run

TAGS := gocv_specific_modules,gocv_videoio,gocv_calib3d,gocv_features2d
export GOFLAGS := -buildvcs=false -tags=$(TAGS)

# What the program needs, and what its tests need beside that.
RUN_PACKAGES  := libopencv-dev pkg-config g++ ffmpeg
TEST_PACKAGES := chromium python3-scipy python3-numpy libgsl-dev poppler-utils fonts-dejavu-core

VERSION := $(shell git describe --always --dirty 2>/dev/null || echo unreleased)

.PHONY: demo test check build long bench install-run install-test clean

build: install-run
	@go build -ldflags "-X main.version=$(VERSION)" -o bin/lodeswing ./cmd/lodeswing

demo: build
	@./bin/lodeswing film lantern --out results/demo
	@./bin/lodeswing measure results/demo/lantern.mp4 --rig results/demo/lantern.toml --out results/demo/lantern-result
	@echo "The report is $(CURDIR)/results/demo/lantern-result/report.html"

test: install-run install-test
	go test -timeout 15m ./...
	CGO_ENABLED=0 GOFLAGS=-buildvcs=false go test -timeout 5m ./track/clip/... ./track/shake/... ./track/board/...

check: install-run
	@unformatted=$$(go tool gofumpt -l cmd track analyze plots samples); \
	if [ -n "$$unformatted" ]; then echo "not formatted (run: go tool gofumpt -w .):"; echo "$$unformatted"; exit 1; fi
	go vet ./...
	CGO_ENABLED=0 GOFLAGS=-buildvcs=false go vet ./...
	go tool staticcheck ./...

long: install-run install-test
	go test -timeout 3h $$(grep -rl --include='*_test.go' '"long"' analyze track cmd samples | xargs -n1 dirname | sort -u | sed 's|^|./|') -args -long

bench: install-run install-test
	go test -run '^$$' -bench . -benchtime 3x ./...

install-run:
	@.ci/install $(RUN_PACKAGES)

install-test:
	@.ci/install $(TEST_PACKAGES)

clean:
	rm -rf bin results
