# Everything a developer or CI runs, by name. `make test` needs only Go; the
# other targets bring their tools as Go modules, pinned in tools/*.mod so that
# none of them enters the product's go.mod.

GO       ?= go
BUF       = $(GO) tool -modfile=tools/buf.mod buf
GOFUMPT   = $(GO) tool -modfile=tools/gofumpt.mod gofumpt
LINTER    = $(GO) tool -modfile=tools/lint.mod golangci-lint
PROTOS    = $(wildcard proto/leadline/v1/*.proto)
VERSION  ?= $(shell git describe --tags --always --dirty 2>/dev/null || echo unknown)
FUZZ_TIME ?= 60s

# The packages that start goroutines; a test in engine/ compares the list with
# the code. A tree may be named before it exists.
RACE_PACKAGES = ./engine/server/... ./engine/client/... ./engine/livelog/... ./engine/study/sweep ./engine/study/forecast ./engine/study/tune ./engine/journal/... ./cmd/...

.PHONY: build test race fuzz credibility bench fetch fetch-arrow fetch-clients generate generate-check \
	generate-clients generate-clients-check format format-check vet lint lint-only vuln licences licences-check clean

# build makes one static binary.
build:
	CGO_ENABLED=0 $(GO) build -trimpath -ldflags '-s -w -X main.version=$(VERSION)' -o bin/leadline ./cmd/leadline

# test runs every test and prints the slowest ten and what was skipped. It is
# the same as `go run ./tools/testreport`. LEADLINE_NO_SKIP=1 makes a skip a
# failure.
test:
	$(GO) run ./tools/testreport

# race runs the concurrent packages under the race detector, which needs a C
# compiler. -short leaves out what filters for long and what runs the program,
# which is built without the detector.
race:
	CGO_ENABLED=1 $(GO) test -race -short $(foreach p,$(RACE_PACKAGES),$(if $(wildcard $(p:/...=)/),$(p)))

# fuzz fuzzes every target live; they share FUZZ_TIME.
fuzz:
	$(GO) run ./tools/fuzz -total $(FUZZ_TIME)

# credibility draws the table of claims about posteriors, in at most an hour, and
# writes build/credibility.json; a run that was stopped goes on.
credibility:
	$(GO) run ./fixtures/credibility/run

# bench runs every benchmark once over, without tests.
bench:
	$(GO) test -run '^$$' -bench . -benchmem ./...

# fetch brings outside data for the tests, see DATA.md, the library that reads a
# compiled road map a second time, and the packages of the JavaScript client.
fetch: fetch-arrow fetch-clients
	$(GO) run ./fixtures/outside/fetch

ARROW_JS = apache-arrow@21.2.0
fetch-arrow:
	npm install --silent --no-audit --no-fund --no-save --prefix build/outside $(ARROW_JS)

WEB = engine/client/web
fetch-clients:
	npm ci --include=dev --silent --no-audit --no-fund --prefix $(WEB)

# generate writes the Go code of the API beside its .proto files, and the
# messages and types of the clients in other languages.
generate: generate-clients
	$(BUF) lint proto
	$(BUF) generate proto --template proto/buf.gen.yaml

# generate-clients needs protoc, of Debian's protobuf-compiler, and npm.
generate-clients: fetch-clients
	$(BUF) generate proto --template proto/buf.gen.clients.yaml
	npm run --silent --prefix $(WEB) types

generate-clients-check: generate-clients
	@changed="$$(git status --porcelain engine/client)"; \
	if [ -n "$$changed" ]; then echo "not what is committed:"; echo "$$changed"; git diff engine/client; exit 1; fi

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

# format rewrites; format-check names what is not formatted and fails.
format:
	$(GOFUMPT) -w $(SOURCES)

format-check:
	@unformatted="$$($(GOFUMPT) -l $(SOURCES))" || exit 1; \
	if [ -n "$$unformatted" ]; then echo "not formatted, run make format:"; echo "$$unformatted"; exit 1; fi

SOURCES = $(wildcard cmd engine fixtures network proto terrain tools)

# vet looks at the code for arm64, too, where products and sums could fuse.
vet:
	$(GO) vet ./...
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
