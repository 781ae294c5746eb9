# Quietbell: GNU make, pkg-config, no generated build files.
#
#   make            build/quietbell, build/quietbelld, build/quietbell-driver
#   make demo       installs what is missing (deploy/deps), builds, runs the main job end to end
#   make test       installs what is missing, builds, lint, unit, outside and system tests
#   make check      make test and the sanitizer and valgrind runs
#   make install    PREFIX (default /usr/local) and DESTDIR are honoured
#
# One room alone while working on it:  make unit ROOMS="base wave" TEST_ROOMS=wave BUILD=build/wave

PREFIX ?= /usr/local
BUILD  ?= build
CC     ?= gcc

ROOMS      ?= base ledger custody wave drill audit wire view
TEST_ROOMS ?= $(ROOMS) store ops api daemon client
PACKAGES   := libsodium libmicrohttpd sqlite3 fftw3 jansson libcurl erfa yaml-0.1 gsl libseccomp

WARN    := -Wall -Wextra -Wpedantic -Wconversion -Wshadow -Wstrict-prototypes -Wvla -Werror
SAFE    := -fstack-protector-strong -D_FORTIFY_SOURCE=2 -fPIE
CFLAGS  ?= -O2 -g
QB_CFLAGS = -std=c17 -D_GNU_SOURCE -I. -MMD -MP -ffp-contract=off $(WARN) $(SAFE) \
            $(filter-out -I/usr/include,$(shell pkg-config --cflags $(PACKAGES) 2>/dev/null))
LIBS_COMMON := -lsodium -lfftw3 -ljansson -lerfa -lyaml -lgsl -lgslcblas -lm -lpthread
LIBS_DAEMON := -lmicrohttpd -lsqlite3 -lseccomp
LIBS_CLIENT := -lcurl -lsqlite3 -lseccomp
QB_LDFLAGS   = -pie -Wl,-z,relro,-z,now $(LDFLAGS)

common_src := $(foreach r,$(ROOMS),$(wildcard server/$(r)/*.c))
daemon_src := $(wildcard server/store/*.c server/ops/*.c server/api/*.c server/daemon/*.c)
client_src := $(wildcard client/link/*.c client/cli/*.c client/report/*.c client/board/*.c)
driver_src := $(wildcard client/agent/*.c)
# Files with a main() of their own; everything else can be linked into a test.
mains      := server/daemon/main.c client/cli/main.c client/agent/main.c

obj = $(patsubst %.c,$(BUILD)/obj/%.o,$(1))
lib        := $(BUILD)/libquietbell.a
lib_daemon := $(BUILD)/libquietbelld.a
lib_client := $(BUILD)/libquietbell-client.a
programs   := $(BUILD)/quietbell $(BUILD)/quietbelld $(BUILD)/quietbell-driver

# A failed recipe must not leave a half-written file behind.
.DELETE_ON_ERROR:
.PHONY: all lib libs unit test-programs outside system test check lint arrows format deps demo bench blind fuzz sanitize valgrind install clean
all: $(programs)
lib: $(lib)

$(BUILD)/obj/%.o: %.c
	@mkdir -p $(@D)
	$(CC) $(QB_CFLAGS) $(CFLAGS) $(EXTRA) -c -o $@ $<

$(lib): $(call obj,$(common_src))
	@rm -f $@; ar rcs $@ $^
# The SQL files of schema/ become string constants, in order of their numbers.
sql := $(sort $(wildcard schema/*.sql))
$(BUILD)/gen/schema.c: $(sql)
	@mkdir -p $(@D)
	@{ echo '#include <stddef.h>'; echo 'extern const char *const schema_files[];'; \
	   echo 'const char *const schema_files[] = {'; \
	   for f in $^; do sed 's/\\/\\\\/g; s/"/\\"/g; s/.*/"&\\n"/' $$f; echo ','; done; echo 'NULL};'; } >$@
$(BUILD)/gen/schema.o: $(BUILD)/gen/schema.c
	$(CC) $(QB_CFLAGS) $(CFLAGS) $(EXTRA) -c -o $@ $<

$(lib_daemon): $(call obj,$(filter-out $(mains),$(daemon_src))) $(BUILD)/gen/schema.o
	@rm -f $@; ar rcs $@ $^
$(lib_client): $(call obj,$(filter-out $(mains),$(client_src) $(driver_src)))
	@rm -f $@; ar rcs $@ $^

$(BUILD)/quietbelld: $(call obj,server/daemon/main.c) $(lib_daemon) $(lib)
	$(CC) $(QB_LDFLAGS) $(EXTRA) -o $@ $^ $(LIBS_DAEMON) $(LIBS_COMMON)
$(BUILD)/quietbell: $(call obj,client/cli/main.c) $(lib_client) $(lib)
	$(CC) $(QB_LDFLAGS) $(EXTRA) -o $@ $^ $(LIBS_CLIENT) $(LIBS_COMMON)
$(BUILD)/quietbell-driver: $(call obj,client/agent/main.c) $(lib_client) $(lib)
	$(CC) $(QB_LDFLAGS) $(EXTRA) -o $@ $^ $(LIBS_CLIENT) $(LIBS_COMMON)

# Unit tests: tests/unit/<room>/<file>_test.c, one cmocka program each. Rooms of the daemon and the client link their
# own library too.
unit_src := $(foreach r,$(TEST_ROOMS),$(wildcard tests/unit/$(r)/*_test.c))
unit_bin := $(patsubst %.c,$(BUILD)/%,$(unit_src))
outside_src := $(wildcard tests/outside/*_test.c)
outside_bin := $(patsubst %.c,$(BUILD)/%,$(outside_src))
test_libs = $(if $(filter tests/unit/store/% tests/unit/ops/% tests/unit/api/% tests/unit/daemon/%,$(1)),$(lib_daemon)) \
            $(if $(filter tests/unit/client/%,$(1)),$(lib_client)) $(lib)

.SECONDEXPANSION:
$(BUILD)/tests/%_test: tests/%_test.c $$(call test_libs,tests/%_test.c)
	@mkdir -p $(@D)
	$(CC) $(QB_CFLAGS) $(CFLAGS) $(EXTRA) $(QB_LDFLAGS) -o $@ $< $(filter %.a,$^) \
	  $(if $(findstring $(lib_daemon),$^),$(LIBS_DAEMON)) $(if $(findstring $(lib_client),$^),$(LIBS_CLIENT)) \
	  -lcmocka $(LIBS_COMMON)

# Small programs that scripts in tests/outside/ call for our numbers.
helper_bin := $(patsubst %.c,$(BUILD)/%,$(wildcard tests/outside/*_helper.c))
$(BUILD)/tests/outside/%_helper: tests/outside/%_helper.c $(lib)
	@mkdir -p $(@D)
	$(CC) $(QB_CFLAGS) $(CFLAGS) $(EXTRA) $(QB_LDFLAGS) -o $@ $< $(lib) $(LIBS_COMMON)

# Hostile parties of system tests, which no program of ours would be.
attack_bin := $(patsubst %.c,$(BUILD)/%,$(wildcard tests/attack/*.c))
$(BUILD)/tests/attack/%: tests/attack/%.c $(lib_client) $(lib)
	@mkdir -p $(@D)
	$(CC) $(QB_CFLAGS) $(CFLAGS) $(EXTRA) $(QB_LDFLAGS) -o $@ $< $(lib_client) $(lib) $(LIBS_CLIENT) $(LIBS_COMMON)

test-programs: $(unit_bin) $(outside_bin) $(helper_bin) $(attack_bin)
unit: $(unit_bin)
	@tests/run $(BUILD)/results $(unit_bin)
outside: $(outside_bin) $(helper_bin)
	@QB_BUILD=$(BUILD) tests/run $(BUILD)/results $(outside_bin) $(wildcard tests/outside/*_test.py)

system: all $(attack_bin)
	@rm -rf $(BUILD)/demo-sealed
	@QB_BUILD=$(BUILD) tests/run --jobs 3 $(BUILD)/results $(sort $(wildcard tests/system/[0-9]*))
test:
	@tests/all $(BUILD)
check: test sanitize valgrind
demo:
	@deploy/deps build && deploy/deps run
	@echo "building ..." && $(MAKE) -s -j$$(nproc) BUILD=$(BUILD) all
	@deploy/demo/run $(BUILD)

# A second, instrumented build beside the first. Without the daemon's room: its filter of system calls, which the tests
# try out, does not allow what the sanitizers need.
sanitize:
	$(MAKE) BUILD=$(BUILD)/asan CFLAGS="-O1 -g -fno-omit-frame-pointer" SAFE=-fPIE \
	  EXTRA="-fsanitize=address,undefined -fno-sanitize-recover=all" \
	  TEST_ROOMS="$(ROOMS) store ops api client" unit
# taint_test runs itself there, with what it plants.
valgrind: $(unit_bin)
	@tests/valgrind $(filter-out %/taint_test,$(unit_bin))

# Everything once more for libFuzzer, in a build directory of its own; then one program a target.
FUZZ_SECONDS ?= 30
fuzz_flags := -O1 -g -fsanitize=address,undefined -fno-sanitize-recover=all
fuzz_bin   := $(patsubst tests/fuzz/%.c,$(BUILD)/fuzz/%,$(wildcard tests/fuzz/*_fuzz.c))
fuzz_libs  := $(BUILD)/fuzz/lib/libquietbell-client.a $(BUILD)/fuzz/lib/libquietbell.a
.PHONY: fuzz-libs fuzz-programs
libs: $(lib) $(lib_client)
fuzz-libs:
	@$(MAKE) -s BUILD=$(BUILD)/fuzz/lib CC="$(FUZZ_CC)" CFLAGS="$(fuzz_flags) -fsanitize=fuzzer-no-link" WARN= SAFE=-fPIE libs
FUZZ_CC ?= clang
$(BUILD)/fuzz/%: tests/fuzz/%.c fuzz-libs
	@clang -std=c17 -D_GNU_SOURCE -I. $(fuzz_flags) -fsanitize=fuzzer -o $@ $< $(fuzz_libs) $(LIBS_CLIENT) $(LIBS_COMMON)
fuzz-programs: $(fuzz_bin)
fuzz: fuzz-programs
	@tests/fuzz/run $(FUZZ_SECONDS) $(fuzz_bin)

# Figures, never pass or fail: each operation beside the bare library calls that it needs, in one run.
bench_bin := $(patsubst %.c,$(BUILD)/%,$(wildcard tests/bench/*_bench.c))
$(BUILD)/tests/bench/%: tests/bench/%.c $(lib)
	@mkdir -p $(@D)
	$(CC) $(QB_CFLAGS) $(CFLAGS) $(QB_LDFLAGS) -o $@ $< $(lib) $(LIBS_COMMON)
bench: $(bench_bin)
	@for b in $(bench_bin); do $$b || exit 1; done

# The blind game at full size (docs/blind-game.md): half an hour for 200 campaigns on a quiet machine.
CAMPAIGNS ?= 200
blind: all
	@mkdir -p $(BUILD)/blind
	@tests/blind/run --build $(BUILD) --campaigns $(CAMPAIGNS) --bound 0.02 --out $(BUILD)/blind/figures.json --keep $(BUILD)/blind/tables

deps:
	deploy/deps all
lint:
	tests/lint
arrows:
	tests/lint arrows
format:
	git ls-files '*.c' '*.h' | xargs clang-format -i

install: all
	install -d $(DESTDIR)$(PREFIX)/bin $(DESTDIR)$(PREFIX)/sbin $(DESTDIR)$(PREFIX)/share/man/man1 $(DESTDIR)$(PREFIX)/share/man/man8
	install -m 755 $(BUILD)/quietbell $(BUILD)/quietbell-driver $(DESTDIR)$(PREFIX)/bin/
	install -m 755 $(BUILD)/quietbelld $(DESTDIR)$(PREFIX)/sbin/
	install -m 644 $(wildcard docs/man/*.1) $(DESTDIR)$(PREFIX)/share/man/man1/
	install -m 644 $(wildcard docs/man/*.8) $(DESTDIR)$(PREFIX)/share/man/man8/

clean:
	rm -rf $(BUILD)

-include $(shell find $(BUILD)/obj $(BUILD)/tests -name '*.d' 2>/dev/null)
