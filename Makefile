# Hushwatch. `make` builds, `make demo` plays a simulated watch, `make check` runs every test.
# Each target installs what it needs from Debian first (see PACKAGES); set NO_INSTALL=1 to skip that.

VERSION = 0.1.0
BUILD ?= build
ifeq ($(origin CC),default)
CC = gcc
endif
SANITIZE ?=
OPTIMIZE ?= -O2 -ftree-vectorize -march=x86-64-v2
ifneq ($(shell uname -m),x86_64)
OPTIMIZE = -O2 -ftree-vectorize
endif

PACKAGES = gcc make pkg-config portaudio19-dev libfftw3-dev libmicrohttpd-dev libsqlite3-dev libsndfile1-dev \
	libconfig-dev libjansson-dev libsodium-dev libsystemd-dev libgps-dev
TEST_PACKAGES = binutils procps git libcmocka-dev libasound2-dev libasound2-plugins python3 python3-numpy python3-scipy python3-selenium \
	chromium chromium-driver sqlite3 openssl curl gpsd clang libclang-rt-14-dev

WARNINGS = -Wall -Wextra -Wshadow -Wconversion -Wstrict-prototypes -Wmissing-prototypes -Wvla
HARDENING = -D_FORTIFY_SOURCE=2 -fstack-protector-strong -fPIE
CPPFLAGS += -Ilib -Idaemon -Itests -I$(BUILD)/generated -D_GNU_SOURCE -DHUSHWATCH_VERSION='"$(VERSION)"'
CFLAGS += -std=c11 -g $(OPTIMIZE) $(WARNINGS) $(HARDENING) $(SANITIZE) -ffile-prefix-map=$(CURDIR)=. -pthread -MMD -MP
LDFLAGS += $(SANITIZE) -pthread -pie -Wl,-z,relro,-z,now
LIB_LIBS = -lfftw3f -lsodium -ljansson -lm
DAEMON_LIBS = -lmicrohttpd -lsqlite3 -lsndfile -lconfig -lsystemd -lgps $(LIB_LIBS)

MAINS = daemon/hushwatchd.c daemon/hushwatch.c daemon/capture/hushwatch-capture.c
LIB_SOURCES = $(wildcard lib/*.c lib/*/*.c)
DAEMON_SOURCES = $(filter-out $(MAINS),$(wildcard daemon/*.c daemon/*/*.c))
LIB_OBJECTS = $(LIB_SOURCES:%.c=$(BUILD)/%.o)
DAEMON_OBJECTS = $(DAEMON_SOURCES:%.c=$(BUILD)/%.o) $(BUILD)/generated/web.o
SUPPORT_OBJECTS = $(patsubst %.c,$(BUILD)/%.o,$(filter-out tests/support/pcm_%.c tests/support/block_%.c tests/support/watch_facts.c,$(wildcard tests/support/*.c)) \
	$(filter-out tests/bench/calls/main.c,$(wildcard tests/bench/calls/*.c)))
WEB_FILES = $(wildcard web/*)

PROGRAMS = $(BUILD)/hushwatchd $(BUILD)/hushwatch $(BUILD)/hushwatch-capture
TEST_PROGRAMS = $(patsubst %.c,$(BUILD)/%,$(wildcard tests/unit/*.c tests/reference/*.c tests/scenario/*.c \
	tests/replay/*.c tests/system/*.c))
BENCH_PROGRAMS = $(patsubst %.c,$(BUILD)/%,$(wildcard tests/bench/*.c))
FUZZ_PROGRAMS = $(patsubst %.c,$(BUILD)/%,$(wildcard tests/fuzz/*.c))

.PHONY: all programs fuzzers tests install-needs install-test-needs demo check asan tsan soak fuzz bench bench-calls clean format
all: install-needs
	@$(MAKE) --no-print-directory -j2 programs
programs: $(PROGRAMS)

# ---- what is needed from Debian
define INSTALL
@missing=""; for p in $(1); do dpkg-query -W -f '$${Status}' $$p 2>/dev/null | grep -q 'install ok' || missing="$$missing $$p"; done; \
if [ -n "$$missing" ] && [ -z "$(NO_INSTALL)" ]; then echo "installing:$$missing"; \
  sudo=""; [ "$$(id -u)" = 0 ] || sudo=sudo; \
  $$sudo env DEBIAN_FRONTEND=noninteractive sh -c "apt-get -qq update && apt-get -qq install -y --no-install-recommends $$missing" >/dev/null; fi
endef
install-needs:
	$(call INSTALL,$(PACKAGES))
install-test-needs:
	$(call INSTALL,$(PACKAGES) $(TEST_PACKAGES))

# ---- objects and programs
$(BUILD)/%.o: %.c
	@mkdir -p $(@D)
	$(CC) $(CPPFLAGS) $(CFLAGS) -c $< -o $@
$(BUILD)/generated/web.c: $(WEB_FILES) tests/support/embed.sh
	@mkdir -p $(@D)
	sh tests/support/embed.sh $(WEB_FILES) > $@
$(BUILD)/generated/web.o: $(BUILD)/generated/web.c
	$(CC) $(CPPFLAGS) $(CFLAGS) -c $< -o $@
$(BUILD)/libhushwatch.a: $(LIB_OBJECTS)
	@rm -f $@
	ar rcs $@ $^
$(BUILD)/libdaemon.a: $(DAEMON_OBJECTS)
	@rm -f $@
	ar rcs $@ $^
$(BUILD)/libsupport.a: $(SUPPORT_OBJECTS)
	@rm -f $@
	ar rcs $@ $^
ARCHIVES = $(BUILD)/libdaemon.a $(BUILD)/libhushwatch.a

$(BUILD)/hushwatchd: $(BUILD)/daemon/hushwatchd.o $(ARCHIVES)
	$(CC) $(LDFLAGS) -o $@ $^ $(DAEMON_LIBS)
$(BUILD)/hushwatch: $(BUILD)/daemon/hushwatch.o $(ARCHIVES)
	$(CC) $(LDFLAGS) -o $@ $^ $(DAEMON_LIBS)
$(BUILD)/hushwatch-capture: $(patsubst %.c,$(BUILD)/%.o,$(wildcard daemon/capture/*.c)) $(BUILD)/libhushwatch.a
	$(CC) $(LDFLAGS) -o $@ $^ -lportaudio -lm

# ---- tests: every C file in a test folder is a program, every .sh and .py in it a script
$(BUILD)/tests/%: $(BUILD)/tests/%.o $(BUILD)/libsupport.a $(ARCHIVES)
	$(CC) $(LDFLAGS) -o $@ $^ -lcmocka $(DAEMON_LIBS)
WRAPPED = malloc calloc realloc aligned_alloc free fftwf_alloc_real fftwf_alloc_complex fftwf_free
$(BUILD)/tests/unit/create_failures: LDFLAGS += $(WRAPPED:%=-Wl,--wrap=%)
$(BUILD)/libasound_module_pcm_feed.so: tests/support/pcm_feed.c
	@mkdir -p $(@D)
	gcc -O2 -std=gnu11 -shared -fPIC -DPIC $< -o $@ -lasound

tests: $(PROGRAMS) $(TEST_PROGRAMS) $(BUILD)/tests/browser/board_server $(BUILD)/tests/support/watch_facts $(BUILD)/libasound_module_pcm_feed.so
check: install-test-needs
	@$(MAKE) --no-print-directory -j2 tests
	@/usr/bin/python3 tests/support/run.py --build $(BUILD) $(ONLY)

ASAN_FLAGS = -fsanitize=address,undefined -fno-sanitize-recover=all -fno-omit-frame-pointer
TSAN_FLAGS = -fsanitize=thread
asan: install-test-needs
	@$(MAKE) --no-print-directory -j2 tests BUILD=build/asan SANITIZE="$(ASAN_FLAGS)" HARDENING=-fPIE OPTIMIZE=-O1
	@/usr/bin/python3 tests/support/run.py --build build/asan --short unit replay system $(ONLY)
tsan: install-test-needs
	@$(MAKE) --no-print-directory -j2 tests BUILD=build/tsan SANITIZE="$(TSAN_FLAGS)" HARDENING=-fPIE OPTIMIZE=-O1
	@/usr/bin/python3 tests/support/run.py --build build/tsan --short unit replay system $(ONLY)
soak: install-test-needs
	@$(MAKE) --no-print-directory -j2 tests
	@/usr/bin/python3 tests/support/run.py --build $(BUILD) --long $(ONLY)
	@[ -n "$(ONLY)" ] || $(MAKE) --no-print-directory bench-calls PIECE=pool
bench: install-test-needs
	@$(MAKE) --no-print-directory -j2 $(PROGRAMS) $(BENCH_PROGRAMS)
	@for b in $(BENCH_PROGRAMS); do $$b || exit 1; done

# What the detectors can do: PIECE of the bench (tests/bench/calls/main.c), SEED (0: the day's number), SCALE; what is
# measured stays in build/bench-calls, so that it can be stopped and taken up again. PIECE=sweep measures what the plot
# needs and has not (at SWEEP_SCALE), draws it and writes the table in docs anew.
PIECE ?= all
SEED ?= 0
SCALE ?= 1
SWEEP_SCALE ?= 0.25
BUDGET_S ?= 1200
bench-calls: install-test-needs
	@$(MAKE) --no-print-directory -j2 $(BUILD)/tests/bench/calls/main
	@mkdir -p $(BUILD)/bench-calls
ifeq ($(PIECE),sweep)
	@$(BUILD)/tests/bench/calls/main $(BUILD)/bench-calls sweep $(SEED) $(SWEEP_SCALE)
	@/usr/bin/python3 tests/bench/calls_sweep.py $(BUILD)/bench-calls docs/detectors-sweep.svg
	@/usr/bin/python3 tests/bench/calls_table.py $(BUILD)/bench-calls docs/detectors.md >/dev/null
else
	@$(BUILD)/tests/bench/calls/main $(BUILD)/bench-calls $(PIECE) $(SEED) $(SCALE) $(BUDGET_S)
	@/usr/bin/python3 tests/bench/calls_table.py $(BUILD)/bench-calls
endif

# Each fuzzer runs FUZZ_S seconds; what it finds stays in build/fuzz.
FUZZ_S ?= 60
$(BUILD)/tests/fuzz/%: $(BUILD)/tests/fuzz/%.o $(ARCHIVES)
	$(CC) $(LDFLAGS) -fsanitize=fuzzer -o $@ $^ $(DAEMON_LIBS)
fuzzers: $(FUZZ_PROGRAMS)
fuzz: install-test-needs
	@$(MAKE) --no-print-directory -j2 fuzzers BUILD=build/fuzz CC=clang HARDENING=-fPIE OPTIMIZE=-O1 \
	  SANITIZE="-fsanitize=address,undefined -fsanitize=fuzzer-no-link -fno-sanitize-recover=all"
	@for f in $(notdir $(FUZZ_PROGRAMS)); do mkdir -p build/fuzz/corpus/$$f; \
	  LSAN_OPTIONS=suppressions=tests/support/leaks.supp build/fuzz/tests/fuzz/$$f -max_total_time=$(FUZZ_S) -max_len=4096 -print_final_stats=1 -artifact_prefix=build/fuzz/$$f- \
	    build/fuzz/corpus/$$f tests/fuzz/seeds/$$f 2>&1 | tail -n 12 || exit 1; done

demo: all
	@sh tests/support/demo.sh $(BUILD)
format:
	clang-format -i $$(git ls-files '*.c' '*.h')
clean:
	rm -rf build

-include $(shell find $(BUILD) -name '*.d' 2>/dev/null)
.SECONDARY:
