# Everything a developer or CI runs, by name. `make test` needs only Go; the
# other targets bring their tools as Go modules, pinned in tools/*.mod so that
# none of them enters the product's go.mod.

GO       ?= go
BUF       = $(GO) tool -modfile=tools/buf.mod buf
GOFUMPT   = $(GO) tool -modfile=tools/gofumpt.mod gofumpt
VECTORS   = $(GO) run -modfile=tools/avo.mod $(wildcard tools/vectors/*.go) -pkg kernel
LINTER    = $(GO) tool -modfile=tools/lint.mod golangci-lint
PROTOS    = $(wildcard proto/leadline/v1/*.proto)
VERSION  ?= $(shell git describe --tags --always --dirty 2>/dev/null || echo unknown)
FUZZ_TIME ?= 30s
FUZZ_PART ?= 0/1
RACE_PART ?= 0/1
TRIM     ?= -trimpath

# The packages that start goroutines; a test in engine/ compares the list with
# the code. A tree may be named before it exists.
RACE_PACKAGES = ./engine/server/... ./engine/client/... ./engine/livelog/... ./engine/study/sweep ./engine/study/afar ./engine/study/forecast ./engine/study/tune ./engine/journal/... ./cmd/...

.PHONY: evidence build test race fuzz credibility study local credibility-reach survive bench bench-short benchmarks fetch fetch-arrow fetch-clients fetch-page page page-check generate generate-check vectors \
	generate-clients generate-clients-check format format-check vet vet-arm64 lint lint-only vuln licences licences-check clean

# build makes one static binary.
build:
	CGO_ENABLED=0 $(GO) build $(TRIM) -ldflags '-s -w -X main.version=$(VERSION)' -o bin/leadline ./cmd/leadline

# test runs every test and prints the slowest ten and what was skipped. It is
# the same as `go run ./tools/testreport`. LEADLINE_NO_SKIP=1 makes a skip a
# failure.
test:
	$(GO) run ./tools/testreport

# race runs the concurrent packages under the race detector, which needs a C
# compiler. -short leaves out what filters for long and what runs the program,
# which is built without the detector. RACE_PART=k/n does every nth entry of the list.
race:
	CGO_ENABLED=1 $(GO) test -race -short -vet=off $(shell printf '%s\n' $(foreach p,$(RACE_PACKAGES),$(if $(wildcard $(p:/...=)/),$(p))) | awk -v part=$(RACE_PART) 'BEGIN { split(part, of, "/") } NR % of[2] == of[1]')

# fuzz fuzzes every target live, or those of a part of the packages; they share FUZZ_TIME.
fuzz:
	$(GO) run ./tools/fuzz -total $(FUZZ_TIME) -part $(FUZZ_PART)

# credibility draws the table of claims about posteriors for 55 minutes and writes
# build/credibility.json; called again, it goes on. The whole takes some hours.
credibility:
	$(GO) run ./fixtures/credibility/run

# credibility-reach draws the table about velocity grids and traffic, likewise, and
# writes build/credibility-reach.json.
credibility-reach:
	$(GO) run ./fixtures/credibility/run -table reach

# study draws the table of claims about studies of drives and writes
# build/study.json; a run that was stopped goes on. STUDY takes flags of the
# command, such as -rows or -share.
study:
	$(GO) run ./fixtures/credibility/run -table study $(STUDY)

# evidence makes docs/evidence.md of the tables in docs/evidence. A table that was drawn
# is kept by go run ./tools/evidence -add build/study.json -table study -code COMMIT
# -on "two cores, idle" -as study.
evidence:
	$(GO) run ./tools/evidence

# local puts a log of your own, of NMEA 0183 sentences with satellite fixes, speeds,
# headings and depths, through the case of depths: make local LOG=survey.nmea
local:
	$(GO) run ./fixtures/study/local $(LOCAL) "$(LOG)"

# survive kills servers, damages their files, fills their disk and sets back their
# clock, and writes build/survive.json: at most a quarter of an hour a row.
survive:
	$(GO) run ./fixtures/survive -build build

# bench measures the table of speed; benchmarks runs every Go benchmark once over,
# without tests.
bench:
	$(GO) run ./fixtures/bench/run -build build

bench-short:
	$(GO) run ./fixtures/bench/run -build build -short

benchmarks:
	$(GO) test -run '^$$' -bench . -benchmem ./...

# fetch brings outside data for the tests, see DATA.md, the libraries that read a
# compiled road map and a track's Parquet file a second time, and the packages of the JavaScript client and
# of the page.
fetch: fetch-arrow fetch-clients fetch-page
	$(GO) run ./fixtures/outside/fetch

ARROW_JS = apache-arrow@21.2.0 hyparquet@1.31.5
fetch-arrow:
	npm install --silent --no-audit --no-fund --no-save --prefix build/outside $(ARROW_JS)

WEB = engine/client/web
fetch-clients:
	npm ci --include=dev --silent --no-audit --no-fund --prefix $(WEB)

# generate writes the Go code of the API beside its .proto files, and the
# messages and types of the clients in other languages, and the page, which holds
# them; and adds what is new to the API that tests keep from being broken.
generate: generate-clients page vectors
	$(BUF) lint proto
	$(BUF) generate proto --template proto/buf.gen.yaml
	LEADLINE_REWRITE=added $(GO) test ./proto/... -run TestNothingBreaks

# vectors writes the loops of engine/kernel for amd64.
vectors:
	$(VECTORS) -out engine/kernel/vectors_amd64.s -stubs engine/kernel/vectors_amd64.go

# generate-clients needs protoc, of Debian's protobuf-compiler, and npm.
generate-clients: fetch-clients
	$(BUF) generate proto --template proto/buf.gen.clients.yaml
	npm run --silent --prefix $(WEB) types

generate-clients-check: generate-clients
	@changed="$$(git status --porcelain engine/client)"; \
	if [ -n "$$changed" ]; then echo "not what is committed:"; echo "$$changed"; git diff engine/client; exit 1; fi

# page makes the bundle of the page, which is committed, out of engine/page/src;
# page-check compares them, and has the types checked.
PAGE = engine/page
PAGE_OUT ?= $(PAGE)/dist
PAGE_PACKAGES = $(PAGE)/node_modules/@noble/hashes $(PAGE)/node_modules/preact $(PAGE)/node_modules/@preact/signals $(PAGE)/node_modules/@preact/signals-core \
	$(PAGE)/node_modules/uplot $(WEB)/node_modules/@bufbuild/protobuf $(WEB)/node_modules/@connectrpc/connect $(WEB)/node_modules/@connectrpc/connect-web
page: fetch-page fetch-clients
	rm -rf $(PAGE_OUT)
	NODE_PATH=$(CURDIR)/$(WEB)/node_modules $(GO) tool -modfile=tools/esbuild.mod esbuild $(PAGE)/src/main.tsx $(PAGE)/src/style.css \
		--bundle --minify --format=esm --target=es2022 --charset=utf8 --jsx=automatic --jsx-import-source=preact --tsconfig-raw='{}' \
		--legal-comments=none --log-level=warning '--entry-names=[name]-[hash]' --outdir=$(PAGE_OUT)
	for p in $(PAGE_PACKAGES); do \
		grep -h -m1 '"name"' $$p/package.json | tr -d ' ",' ; grep -h -m1 '"version"' $$p/package.json | tr -d ' ",'; grep -h -m1 '"license"' $$p/package.json | tr -d ' ",'; \
		cat $$p/LICENSE* 2>/dev/null; echo; done >$(PAGE_OUT)/licences.txt

page-check:
	$(MAKE) page PAGE_OUT=build/_page
	npm run --silent --prefix $(PAGE) types
	diff -r build/_page $(PAGE)/dist

fetch-page:
	npm ci --include=dev --silent --no-audit --no-fund --prefix $(PAGE)

# generate-check generates into build/, in a folder that ./... passes over, and
# compares with what is committed.
generate-check:
ifeq ($(PROTOS),)
	@echo "generate-check: no .proto files"
else
	$(BUF) lint proto
	rm -rf build/_generated
	$(BUF) generate proto --template proto/buf.gen.yaml -o build/_generated
	diff -r -x '*.proto' -x 'buf*.yaml' -x 'doc.go' -x '*_test.go' -x testdata proto build/_generated/proto
endif
	mkdir -p build/_generated
	$(VECTORS) -out build/_generated/vectors_amd64.s -stubs build/_generated/vectors_amd64.go
	for f in vectors_amd64.s vectors_amd64.go; do diff -I '^// Code generated' build/_generated/$$f engine/kernel/$$f || exit 1; done

# format rewrites; format-check names what is not formatted and fails.
format:
	$(GOFUMPT) -w $(SOURCES)

format-check:
	@unformatted="$$($(GOFUMPT) -l $(SOURCES))" || exit 1; \
	if [ -n "$$unformatted" ]; then echo "not formatted, run make format:"; echo "$$unformatted"; exit 1; fi

SOURCES = $(wildcard cmd engine fixtures network proto terrain tools)

# vet looks at the code for arm64, too, where products and sums could fuse.
vet: vet-arm64
	$(GO) vet ./...

# vet-arm64 vets what other processors compile; lint-only holds the checks of vet
# for this one.
vet-arm64:
	GOARCH=arm64 $(GO) vet ./engine/kernel/... ./engine/filter/...

lint: format-check vet lint-only

lint-only:
	$(LINTER) run ./...

# vuln fails on a known vulnerability of a third-party module that is called.
vuln:
	$(GO) run ./tools/vulncheck

# licences writes THIRD_PARTY.md from go.mod; licences-check compares them.
licences:
	$(GO) run ./tools/licences

licences-check:
	$(GO) run ./tools/licences -check

# clean removes what was built, fetched data and the vulnerability database
# included.
clean:
	rm -rf bin build
