# Everything a developer or CI runs, by name. `make test` needs only Go; the
# other targets fetch their tools as Go modules, pinned in tools/*.mod so that
# none of them enters the product's go.mod.

GO       ?= go
BUF       = $(GO) tool -modfile=tools/buf.mod buf
PROTOS    = $(wildcard proto/leadline/v1/*.proto)

.PHONY: generate generate-check

# generate writes the Go code of the API beside its .proto files.
generate:
	$(BUF) lint proto
	$(BUF) generate proto --template proto/buf.gen.yaml

# generate-check generates into build/ and compares with what is committed.
generate-check:
ifeq ($(PROTOS),)
	@echo "generate-check: no .proto files"
else
	$(BUF) lint proto
	rm -rf build/generated
	$(BUF) generate proto --template proto/buf.gen.yaml -o build/generated
	diff -r -x '*.proto' -x 'buf*.yaml' -x 'doc.go' -x '*_test.go' proto build/generated/proto
endif
