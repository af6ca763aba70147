# Cordwalk: `make run` and `make test` are all that is needed; the rest is for contributors.

TAGS    := no_emoji,migrated_fynedo
VERSION := $(shell git describe --tags --always --dirty 2>/dev/null || echo unversioned)
LDFLAGS := -s -w -X main.version=$(VERSION)
BIN     := bin
# staticcheck is a tool of the tests only; it is run from its module and never linked.
STATICCHECK := go run honnef.co/go/tools/cmd/staticcheck@v0.8.2
# Fyne logs a locale error under LANG=C.
export LANG := en_US.UTF-8

# Loops over every failing operation and the three-node cluster: alike with and without the race detector, and slow with it.
UNRACED := TestEveryOperation|TestPower|TestFolderHistories|TestCluster|TestManyDevices|TestBacklogBetweenProcesses|TestPapersSpeak|TestNoFlippedBit|TestDamage|TestKill|TestFail

.PHONY: run build cli demo test soak bench fuzz cross lint clean

run: build
	@$(BIN)/cordwalk $(ARGS)

build:
	@.ci/setup desktop
	@mkdir -p $(BIN)
	@echo "building the desktop (the first time takes about four minutes) ..."
	@go build -trimpath -tags $(TAGS) -ldflags "$(LDFLAGS)" -o $(BIN)/cordwalk ./cmd/cordwalk

cli:
	@.ci/setup cli
	@mkdir -p $(BIN)
	@CGO_ENABLED=0 go build -trimpath -ldflags "$(LDFLAGS)" -o $(BIN)/cordwalk-cli ./cmd/cordwalk-cli

demo: cli
	@$(BIN)/cordwalk-cli demo --run

test:
	@.ci/setup test
	go build -tags $(TAGS) ./...
	go vet -tags $(TAGS) ./...
	$(STATICCHECK) -tags $(TAGS) ./...
	go test -tags $(TAGS) -timeout 14m ./...
	go test -race -short -timeout 14m -skip '$(UNRACED)' ./exam ./exam/alert ./exam/anatomy ./exam/scale ./exam/stat ./exam/stim ./storage/... ./sync/... ./app/view
	go test -race -short -timeout 14m -run 'TestUpdateIsCompute|TestWeigherAgreesWithEngine|TestAnalyse$$|TestContinue' ./exam/localise ./exam/progress

# The full counts: kills, crash states, bit flips, histories, simulated courses; and ten minutes for each fuzz target.
soak:
	@.ci/setup test
	CORDWALK_SOAK=1 go test -tags $(TAGS) -timeout 0 -count=1 ./...
	@$(MAKE) fuzz FUZZTIME=10m

FUZZTIME ?= 30s
fuzz:
	@for p in $$(go list ./exam/... ./storage/... ./sync/... ./app/sheet/... ); do \
	  for f in $$(go test -list '^Fuzz' $$p | grep '^Fuzz'); do \
	    echo "$$p $$f"; go test -run '^$$' -fuzz "^$$f\$$" -fuzztime $(FUZZTIME) $$p || exit 1; \
	  done; \
	done

# Benchmarks report ratios in one run; those against other stores are a module of their own.
bench:
	go test -run '^$$' -bench . ./exam/... ./storage/... ./sync/... ./app/sheet/... ./app/view/...
	cd testdata/bench && go test -run '^$$' -bench . ./...

cross:
	for os in linux windows darwin; do CGO_ENABLED=0 GOOS=$$os go build -o /dev/null ./cmd/cordwalk-cli || exit 1; done

clean:
	rm -rf $(BIN)
