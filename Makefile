# undertag: one Makefile. `make demo` and `make test` do all the set-up on a fresh Debian machine.
#
#   make            build/undertagd and build/undertag
#   make demo       the main job on an invented stream
#   make test       unit, integration, reference and fault tests
#   make lint       format check, clang-tidy, cppcheck, a clang build, the units of systemd
#   make sanitize   the tests under ASan+UBSan and TSan; make valgrind: the unit tests, make
#                   valgrind-daemons: what the integration tests start
#   make coverage   the share of branches that the tests take
#   make soak       kill -9 at ROUNDS random moments, of which `make test` has 50
#   make fuzz       each fuzz target for FUZZ_SECONDS, under ASan and UBSan
#   make faults     what happens when any one call of the system fails
#   make corpora    D and W from Debian's own packages; make quality, make bench: figures on them
#   make install    DESTDIR, PREFIX and SYSCONFDIR as usual

BUILD ?= build
PREFIX ?= /usr/local
DESTDIR ?=
# Where the service looks for its configuration.
SYSCONFDIR ?= $(if $(filter /usr /usr/local,$(PREFIX)),/etc,$(PREFIX)/etc)
CFLAGS ?= -O2 -g
CC ?= cc
PYTHON ?= /usr/bin/python3
VERSION := 0.1.0
JOBS ?= 2

WARNINGS := -Wall -Wextra -Wshadow -Wconversion -Wstrict-prototypes -Wformat=2
ifeq ($(CI),true)
WARNINGS += -Werror
endif
BASE_CFLAGS := -std=c17 -D_GNU_SOURCE -I. -fno-strict-aliasing -pthread $(WARNINGS) \
               -DUNDERTAG_VERSION='"$(VERSION)"'
DAEMON_PACKAGES := libuv jansson lmdb libutf8proc inih libdeflate libzip libsystemd nettle
CLIENT_PACKAGES := jansson libutf8proc
# Asked only where something is compiled, so that `make packages` runs on a bare machine.
PACKAGE_CFLAGS = $(shell pkg-config --cflags $(DAEMON_PACKAGES))
DAEMON_LIBS = $(shell pkg-config --libs $(DAEMON_PACKAGES)) -lunistring -lstemmer -lm -pthread
CLIENT_LIBS = $(shell pkg-config --libs $(CLIENT_PACKAGES)) -lm
TEST_LIBS = $(shell pkg-config --libs cmocka zlib)

DAEMON_SOURCES := $(filter-out daemon/main.c,$(wildcard daemon/*.c daemon/*/*.c))
STORAGE_SOURCES := $(wildcard storage/*.c)
# What both programs use is in daemon/: the framing of the wire and the places of its files.
CLIENT_SOURCES := $(filter-out client/main.c,$(wildcard client/*.c)) daemon/lines.c
UNIT_TESTS := $(patsubst tests/unit/%.c,%,$(wildcard tests/unit/test_*.c))
INTEGRATION_TESTS := $(patsubst tests/integration/%.c,%,$(wildcard tests/integration/test_*.c))
REFERENCE_TESTS := $(patsubst tests/reference/%.c,%,$(wildcard tests/reference/test_*.c))
REFERENCE_HELPER_SOURCES := $(filter-out tests/reference/test_%.c,$(wildcard tests/reference/*.c))
FAULT_TESTS := $(patsubst tests/faults/%.c,%,$(wildcard tests/faults/test_*.c))
FAULT_HELPER_SOURCES := $(filter-out tests/faults/test_%.c tests/faults/fail_nth.c,$(wildcard tests/faults/*.c))
# What is preloaded into the daemon.
FAULT_SHIM := $(BUILD)/tests/fail_nth.so
HELPER_SOURCES := $(filter-out tests/integration/test_%.c,$(wildcard tests/integration/*.c))
BENCH_SOURCES := $(wildcard tests/bench/*_bench.c)
BENCH_HELPER_SOURCES := $(filter-out $(BENCH_SOURCES),$(wildcard tests/bench/*.c))

comma := ,
object = $(patsubst %.c,$(BUILD)/%.o,$(1))
LIBRARY_OBJECTS := $(call object,$(DAEMON_SOURCES) $(STORAGE_SOURCES))
CLIENT_OBJECTS := $(call object,$(CLIENT_SOURCES))
LIBRARY := $(BUILD)/libundertag.a
CLIENT_LIBRARY := $(BUILD)/libclient.a
HELPERS := $(call object,$(HELPER_SOURCES))
REFERENCE_HELPERS := $(call object,$(REFERENCE_HELPER_SOURCES))
FAULT_HELPERS := $(call object,$(FAULT_HELPER_SOURCES))
BENCH_HELPERS := $(call object,$(BENCH_HELPER_SOURCES))
PROGRAMS := $(BUILD)/undertagd $(BUILD)/undertag
UNIT_PROGRAMS := $(addprefix $(BUILD)/tests/,$(UNIT_TESTS))
INTEGRATION_PROGRAMS := $(addprefix $(BUILD)/tests/,$(INTEGRATION_TESTS))
REFERENCE_PROGRAMS := $(addprefix $(BUILD)/tests/,$(REFERENCE_TESTS))
FAULT_PROGRAMS := $(addprefix $(BUILD)/tests/,$(FAULT_TESTS))
FUZZ_SOURCES := $(wildcard tests/fuzz/fuzz_*.c)
# One target, two programs: replaying files, and looking for more of them (see `make fuzz`).
FUZZ_PROGRAMS := $(patsubst tests/fuzz/%.c,$(BUILD)/tests/%,$(FUZZ_SOURCES))
FUZZERS := $(patsubst tests/fuzz/%.c,$(BUILD)/fuzzers/%,$(FUZZ_SOURCES))
TEST_PROGRAMS := $(UNIT_PROGRAMS) $(INTEGRATION_PROGRAMS) $(REFERENCE_PROGRAMS) $(FAULT_PROGRAMS) $(FUZZ_PROGRAMS)
BENCH_PROGRAMS := $(patsubst tests/bench/%.c,$(BUILD)/bench/%,$(BENCH_SOURCES))

.PHONY: all demo test lint check-units sanitize valgrind valgrind-daemons coverage faults soak fuzz build-fuzzers corpora \
        quality bench install uninstall clean build-tests run-tests FORCE
.DELETE_ON_ERROR:
.SECONDARY:
# Every rule below names its targets: searching among patterns takes make minutes.
.SUFFIXES:
MAKEFLAGS += --no-builtin-rules

all: $(PROGRAMS)

# One short line a step; `make V=1` shows the commands.
ifeq ($(V),1)
Q :=
say =
else
Q := @
say = @printf '%-8s %s\n' $(1) $(2)
endif

# --- building -----------------------------------------------------------------------------------

# A build made with other flags is made anew: the stamp changes only when they do.
$(BUILD)/flags: FORCE
	@mkdir -p $(BUILD)
	@echo '$(CC) $(BASE_CFLAGS) $(CFLAGS) $(LDFLAGS)' > $@.new
	@cmp -s $@.new $@ && rm $@.new || mv $@.new $@

OBJECTS := $(sort $(call object,$(wildcard daemon/*.c daemon/*/*.c storage/*.c client/*.c tests/*/*.c)))
$(OBJECTS): $(BUILD)/%.o: %.c $(BUILD)/flags
	@mkdir -p $(@D)
	$(call say,compile,$<)
	$(Q)$(CC) $(BASE_CFLAGS) $(PACKAGE_CFLAGS) $(CPPFLAGS) $(CFLAGS) -MMD -MP -c $< -o $@

$(LIBRARY): $(LIBRARY_OBJECTS)
	@rm -f $@
	$(Q)$(AR) rcs $@ $^

$(CLIENT_LIBRARY): $(CLIENT_OBJECTS)
	@rm -f $@
	$(Q)$(AR) rcs $@ $^

$(BUILD)/undertagd: $(BUILD)/daemon/main.o $(LIBRARY)
	$(call say,link,$@)
	$(Q)$(CC) $(CFLAGS) $(LDFLAGS) $^ $(DAEMON_LIBS) -o $@

$(BUILD)/undertag: $(BUILD)/client/main.o $(CLIENT_LIBRARY)
	$(call say,link,$@)
	$(Q)$(CC) $(CFLAGS) $(LDFLAGS) $^ $(CLIENT_LIBS) -o $@

# What programs test_failing_* may fail; see tests/unit/failing_calls.h, which has the same names.
FAILING_CALLS := _exit calloc close fdatasync fdopen fdopendir fflush fork free fstat fstatat fsync ftruncate \
    getrandom lstat malloc mdb_cursor_del mdb_cursor_get mdb_cursor_open mdb_dbi_open \
    mdb_del mdb_drop mdb_env_copyfd2 mdb_env_create mdb_env_get_fd mdb_env_info mdb_env_open \
    mdb_env_set_mapsize mdb_env_set_maxdbs mdb_env_set_maxreaders mdb_env_stat mdb_get \
    mdb_put mdb_reader_check mdb_stat mdb_txn_begin mdb_txn_commit mkdir mkdirat open openat \
    opendir pipe2 pread pthread_cond_init pthread_condattr_init \
    pthread_condattr_setclock pthread_create pthread_mutex_init pthread_rwlock_init pwrite \
    read readlinkat realloc renameat renameat2 stat statvfs strdup strndup symlinkat unlink unlinkat \
    waitpid write
FAILING_PROGRAMS := $(filter $(BUILD)/tests/test_failing_%,$(UNIT_PROGRAMS))
$(FAILING_PROGRAMS): WRAPPED := $(addprefix -Wl$(comma)--wrap=,$(FAILING_CALLS))

$(UNIT_PROGRAMS): $(BUILD)/tests/%: $(BUILD)/tests/unit/%.o $(LIBRARY) $(CLIENT_LIBRARY)
	@mkdir -p $(@D)
	$(call say,link,$@)
	$(Q)$(CC) $(CFLAGS) $(LDFLAGS) $(WRAPPED) $^ $(DAEMON_LIBS) $(TEST_LIBS) -o $@

$(INTEGRATION_PROGRAMS): $(BUILD)/tests/%: $(BUILD)/tests/integration/%.o $(HELPERS) $(LIBRARY)
	@mkdir -p $(@D)
	$(call say,link,$@)
	$(Q)$(CC) $(CFLAGS) $(LDFLAGS) $^ $(DAEMON_LIBS) $(TEST_LIBS) -o $@

$(FAULT_PROGRAMS): $(BUILD)/tests/%: $(BUILD)/tests/faults/%.o $(FAULT_HELPERS) $(HELPERS) $(LIBRARY) | $(FAULT_SHIM)
	@mkdir -p $(@D)
	$(call say,link,$@)
	$(Q)$(CC) $(CFLAGS) $(LDFLAGS) $(filter-out %.so,$^) $(DAEMON_LIBS) $(TEST_LIBS) -o $@

# Without a sanitizer's flags, and it must not become a call of itself (-fno-builtin).
$(FAULT_SHIM): tests/faults/fail_nth.c tests/faults/fail_control.h $(BUILD)/flags
	@mkdir -p $(@D)
	$(call say,link,$@)
	$(Q)$(CC) $(BASE_CFLAGS) -O2 -g -fPIC -fno-builtin -shared $< -ldl -o $@

$(REFERENCE_PROGRAMS): $(BUILD)/tests/%: $(BUILD)/tests/reference/%.o $(REFERENCE_HELPERS) $(HELPERS) $(LIBRARY)
	@mkdir -p $(@D)
	$(call say,link,$@)
	$(Q)$(CC) $(CFLAGS) $(LDFLAGS) $^ $(DAEMON_LIBS) $(TEST_LIBS) -llinear -o $@

$(FUZZ_PROGRAMS): $(BUILD)/tests/%: $(BUILD)/tests/fuzz/%.o $(BUILD)/tests/fuzz/replay.o $(LIBRARY)
	@mkdir -p $(@D)
	$(call say,link,$@)
	$(Q)$(CC) $(CFLAGS) $(LDFLAGS) $^ $(DAEMON_LIBS) -o $@

# libFuzzer brings the main function; LDFLAGS name it.
$(FUZZERS): $(BUILD)/fuzzers/%: $(BUILD)/tests/fuzz/%.o $(LIBRARY)
	@mkdir -p $(@D)
	$(call say,link,$@)
	$(Q)$(CC) $(CFLAGS) $(LDFLAGS) $^ $(DAEMON_LIBS) -o $@

$(BENCH_PROGRAMS): $(BUILD)/bench/%: $(BUILD)/tests/bench/%.o $(BENCH_HELPERS) $(LIBRARY) $(CLIENT_LIBRARY)
	@mkdir -p $(@D)
	$(call say,link,$@)
	$(Q)$(CC) $(CFLAGS) $(LDFLAGS) $^ $(DAEMON_LIBS) -o $@

-include $(OBJECTS:.o=.d)

# --- packages -----------------------------------------------------------------------------------

# Not .PHONY, which would pass over the pattern; FORCE runs it each time.
packages-%: FORCE
	@sh config/install-packages $*

# --- running ------------------------------------------------------------------------------------

demo: packages-build
	@$(MAKE) --no-print-directory -j $(JOBS) all
	@PYTHON=$(PYTHON) sh tests/demo/demo.sh $(BUILD)

test: packages-build packages-test
	@$(MAKE) --no-print-directory -j $(JOBS) run-tests

build-tests: $(PROGRAMS) $(TEST_PROGRAMS) $(BENCH_PROGRAMS)

# GROUPS: of unit, integration, reference, faults, fuzz and python; WRAPPER: what to run the programs under.
GROUPS ?= unit integration reference faults fuzz python
run-tests: build-tests
	@BUILD=$(BUILD) PYTHON=$(PYTHON) WRAPPER='$(WRAPPER)' sh tests/run $(GROUPS)

corpora: $(BUILD)/corpora/D.jsonl $(BUILD)/corpora/W.jsonl

$(BUILD)/corpora/D.jsonl: tests/corpora/make_d.py tests/corpora/corpus.py | packages-quality
	@$(PYTHON) -B $< $@

$(BUILD)/corpora/W.jsonl: tests/corpora/make_w.py tests/corpora/corpus.py | packages-quality
	@$(PYTHON) -B $< $@

# A corpus that cannot be made (no network) is skipped: the scripts say so and end with 69.
# BENCH: what to measure, as in `make bench BENCH='--part plain'`; `--long` adds the long parts.
BENCH ?=
bench: packages-build packages-quality
	@$(MAKE) --no-print-directory -j $(JOBS) all $(BENCH_PROGRAMS)
	-@$(MAKE) --no-print-directory --keep-going corpora
	@$(PYTHON) -B tests/bench/bench.py $(BUILD) --corpora $(BUILD)/corpora $(BENCH)

quality: packages-build packages-quality
	@$(MAKE) --no-print-directory all $(BUILD)/tests/test_snapshot_files
	-@$(MAKE) --no-print-directory --keep-going corpora
	@$(PYTHON) -B tests/quality/quality.py $(BUILD)/undertagd --corpora $(BUILD)/corpora \
	    --kept $(BUILD)/quality --json $(BUILD)/quality.json

# --- checks -------------------------------------------------------------------------------------

ALL_SOURCES = $(shell find client daemon storage tests -name "*.c" | sort)
ALL_HEADERS = $(shell find client daemon storage tests -name "*.h" | sort)

lint: packages-build packages-test packages-lint
	@echo clang-format
	@clang-format --dry-run --Werror $(ALL_SOURCES) $(ALL_HEADERS)
	@echo cppcheck
	@cppcheck --quiet -j $(JOBS) --std=c11 --enable=warning,performance,portability \
	    --inline-suppr --error-exitcode=1 -I. daemon storage client
	@# But for leaks: it believes lost what is stored behind a pointer. ASan looks for those.
	@echo gcc -fanalyzer
	@printf '%s\n' $(DAEMON_SOURCES) $(STORAGE_SOURCES) $(CLIENT_SOURCES) | xargs -P $(JOBS) -I '{}' \
	    gcc $(BASE_CFLAGS) $(PACKAGE_CFLAGS) -O2 -fanalyzer -Wno-analyzer-malloc-leak -Werror -c '{}' -o /dev/null
	@echo clang-tidy, $(words $(ALL_SOURCES)) files
	@printf '%s\n' $(ALL_SOURCES) | xargs -P $(JOBS) -I '{}' \
	    clang-tidy --quiet '{}' -- $(BASE_CFLAGS) $(PACKAGE_CFLAGS) 2>/dev/null
	@$(MAKE) --no-print-directory -j $(JOBS) BUILD=build-clang CC=clang CI=true build-tests
	@echo the units of systemd
	@$(MAKE) --no-print-directory -s check-units

check-units: packages-build packages-lint
	@$(MAKE) --no-print-directory -j $(JOBS) all
	@sh config/check-units $(BUILD)

# Benchmarks and Python have nothing to say under a sanitizer.
sanitize: packages-build packages-test packages-lint
	@$(MAKE) --no-print-directory -j $(JOBS) BUILD=build-asan CC=clang run-tests \
	    GROUPS='unit integration reference faults fuzz' \
	    CFLAGS='-O1 -g -fno-omit-frame-pointer -fsanitize=address,undefined -fno-sanitize-recover=all'
	@TSAN_OPTIONS=suppressions=$(CURDIR)/tests/tsan.supp \
	$(MAKE) --no-print-directory -j $(JOBS) BUILD=build-tsan CC=clang run-tests \
	    GROUPS='unit integration' CFLAGS='-O1 -g -fsanitize=thread'

VALGRIND := valgrind -q --fair-sched=yes --error-exitcode=99 --leak-check=full
valgrind: packages-build packages-test
	@$(MAKE) --no-print-directory -j $(JOBS) BUILD=build-valgrind CFLAGS='-O1 -g' run-tests \
	    GROUPS=unit WRAPPER='$(VALGRIND)'

# 40 minutes: the integration tests, with each daemon and each client that they start under valgrind.
valgrind-daemons: packages-build packages-test
	@$(MAKE) --no-print-directory -j $(JOBS) BUILD=build-valgrind CFLAGS='-O1 -g' build-tests
	@sh tests/integration/wrap build-valgrind $(VALGRIND)
	@UNDERTAG_VALGRIND=1 BUILD=build-valgrind/wrapped sh tests/run integration

# What share of the branches the tests take: a table by file, then the sums. Daemons that a test kills
# leave no counts, so what only they did does not show. COVERAGE_FAULTS: of the allocations, which to
# fail (see tests/faults/scene.c): all, or a number to begin with.
COVERAGE_FAULTS ?= all
coverage: packages-build packages-test packages-coverage
	@UNDERTAG_FAULTS=$(COVERAGE_FAULTS) $(MAKE) --no-print-directory -j $(JOBS) BUILD=build-coverage run-tests \
	    GROUPS='unit integration reference faults fuzz' \
	    CFLAGS='-O1 -g --coverage -fprofile-update=atomic'
	@gcovr --root . --object-directory build-coverage --filter client/ --filter daemon/ \
	    --filter storage/ --exclude '.*/main\.c' --branches --sort-percentage --print-summary \
	    build-coverage

# A seed repeats the changes and the delays, as far as the machine does.
ROUNDS ?= 1000
SEED ?= 1
soak: packages-build packages-test
	@$(MAKE) --no-print-directory -j $(JOBS) all $(FAULT_PROGRAMS)
	@BUILD=$(BUILD) $(BUILD)/tests/test_crash_rounds $(ROUNDS) $(SEED)

# FUZZ_TARGETS: which, as in `make fuzz FUZZ_TARGETS=text`; all of them otherwise.
FUZZ_SECONDS ?= 600
FUZZ_TARGETS ?= $(patsubst tests/fuzz/fuzz_%.c,%,$(FUZZ_SOURCES))
fuzz: packages-build packages-lint
	@$(MAKE) --no-print-directory -j $(JOBS) BUILD=build-fuzz CC=clang build-fuzzers \
	    CFLAGS='-O1 -g -fno-omit-frame-pointer -fsanitize=fuzzer-no-link,address,undefined -fno-sanitize-recover=all' \
	    LDFLAGS='-fsanitize=fuzzer'
	@BUILD=build-fuzz sh tests/fuzz/run $(FUZZ_SECONDS) $(FUZZ_TARGETS)

build-fuzzers: $(FUZZERS)

# Every n of every scene, where `make test` takes some.
faults: packages-build packages-test
	@UNDERTAG_FAULTS=all $(MAKE) --no-print-directory -j $(JOBS) run-tests GROUPS=faults

# --- installing ---------------------------------------------------------------------------------

UNITS := undertagd.service undertagd.socket
DOC_DIR = $(PREFIX)/share/doc/undertag
UNIT_DIR = $(PREFIX)/lib/systemd/system
SYSUSERS_DIR = $(PREFIX)/lib/sysusers.d
TMPFILES_DIR = $(PREFIX)/lib/tmpfiles.d
CONFIG_DIR = $(SYSCONFDIR)/undertag

# A configuration that is there already stays as it is.
install: all
	install -d $(addprefix $(DESTDIR),$(PREFIX)/bin $(DOC_DIR) $(UNIT_DIR) $(SYSUSERS_DIR) \
	    $(TMPFILES_DIR) $(CONFIG_DIR))
	install -m 755 $(PROGRAMS) $(DESTDIR)$(PREFIX)/bin
	install -m 644 README.md LICENSE config/undertag.ini $(DESTDIR)$(DOC_DIR)
	test -e $(DESTDIR)$(CONFIG_DIR)/undertag.ini || \
	    install -m 644 config/undertag.ini $(DESTDIR)$(CONFIG_DIR)
	for unit in $(UNITS); do \
	    sed 's|/usr/local|$(PREFIX)|g; s|/etc/undertag|$(CONFIG_DIR)|g' config/$$unit \
	        > $(DESTDIR)$(UNIT_DIR)/$$unit && chmod 644 $(DESTDIR)$(UNIT_DIR)/$$unit || exit 1; \
	done
	install -m 644 config/undertag.sysusers $(DESTDIR)$(SYSUSERS_DIR)/undertag.conf
	install -m 644 config/undertag.tmpfiles $(DESTDIR)$(TMPFILES_DIR)/undertag.conf

uninstall:
	rm -f $(DESTDIR)$(PREFIX)/bin/undertagd $(DESTDIR)$(PREFIX)/bin/undertag
	rm -f $(addprefix $(DESTDIR)$(UNIT_DIR)/,$(UNITS)) $(DESTDIR)$(SYSUSERS_DIR)/undertag.conf \
	    $(DESTDIR)$(TMPFILES_DIR)/undertag.conf
	rm -rf $(DESTDIR)$(DOC_DIR)

clean:
	rm -rf build build-*
