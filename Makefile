# Incisura: build, test, install. `make` builds build/incisura; `make help` lists the targets.
#
# Three variants of the same sources, each in a folder of its own: release (the program), asan
# (what unit tests link: AddressSanitizer and UBSan), fuzz (clang, for libFuzzer).

MAKEFLAGS += --no-builtin-rules --no-print-directory
.DELETE_ON_ERROR:
.SECONDARY:
.DEFAULT_GOAL := build

PREFIX ?= /usr/local
CC := cc
CLANG ?= clang
PYTHON ?= /usr/bin/python3
FUZZ_SECONDS ?= 60
export PYTHON

WARN := -Wall -Wextra -Wshadow -Wconversion -Wdouble-promotion -Wstrict-prototypes \
        -Wmissing-prototypes -Wundef -Wvla
BASE_CFLAGS := -std=c17 -D_GNU_SOURCE -Isrc $(WARN) -pthread -MMD -MP
LIBS := -lncursesw -ltinfo -lsqlite3 -lcsv -lsodium -linih -ljansson -lz -lm -pthread

BUILD_PACKAGES := gcc libc6-dev make libncurses-dev libsqlite3-dev libcsv-dev \
                  libsodium-dev libinih-dev libjansson-dev zlib1g-dev
TEST_PACKAGES := $(BUILD_PACKAGES) libcriterion-dev libedf-dev libbiosig-dev libvterm-dev \
                 python3-scipy r-base-core sqlite3 clang libclang-rt-14-dev

release_CC := $(CC)
release_CFLAGS := -O2 -g
asan_CC := $(CC)
asan_CFLAGS := -O1 -g -fsanitize=address,undefined -fno-sanitize-recover=all \
               -fno-omit-frame-pointer
fuzz_CC := $(CLANG)
fuzz_CFLAGS := -O1 -g -fsanitize=fuzzer-no-link,address,undefined -fno-sanitize-recover=all \
               -Wno-unknown-warning-option

LIB_SOURCES := $(filter-out src/terminal/% src/command/%,$(wildcard src/*/*.c))
TERMINAL_SOURCES := $(wildcard src/terminal/*.c)
COMMAND_SOURCES := $(wildcard src/command/*.c)
MIGRATIONS := $(sort $(wildcard schema/*.sql))
EMBEDDED := build/gen/embedded.c

# $(1) = variant: objects, the library, the screens' library
define variant
$(1)_LIB := build/$(1)/libincisura.a
$(1)_SCREENS := build/$(1)/libscreens.a
$(1)_LIB_OBJECTS := $(LIB_SOURCES:src/%.c=build/$(1)/%.o) build/$(1)/embedded.o
$(1)_TERMINAL_OBJECTS := $(TERMINAL_SOURCES:src/%.c=build/$(1)/%.o)
$(1)_COMMAND_OBJECTS := $(COMMAND_SOURCES:src/%.c=build/$(1)/%.o)

build/$(1)/%.o: src/%.c
	@mkdir -p $$(@D)
	@$$($(1)_CC) $$(BASE_CFLAGS) $$($(1)_CFLAGS) -c $$< -o $$@

build/$(1)/embedded.o: $$(EMBEDDED)
	@mkdir -p $$(@D)
	@$$($(1)_CC) $$(BASE_CFLAGS) $$($(1)_CFLAGS) -c $$< -o $$@

$$($(1)_LIB): $$($(1)_LIB_OBJECTS)
	@mkdir -p $$(@D) && rm -f $$@ && $$(AR) rcs $$@ $$^

$$($(1)_SCREENS): $$($(1)_TERMINAL_OBJECTS)
	@mkdir -p $$(@D) && rm -f $$@ && $$(AR) rcs $$@ $$^

build/$(1)/incisura: $$($(1)_COMMAND_OBJECTS) $$($(1)_SCREENS) $$($(1)_LIB)
	@$$($(1)_CC) $$($(1)_CFLAGS) $$^ $$(LIBS) -o $$@

-include $$($(1)_LIB_OBJECTS:.o=.d) $$($(1)_TERMINAL_OBJECTS:.o=.d) $$($(1)_COMMAND_OBJECTS:.o=.d)
endef
$(foreach v,release asan fuzz,$(eval $(call variant,$(v))))

$(EMBEDDED): schema/embed.sh schema/codebook.csv $(MIGRATIONS)
	@mkdir -p $(@D)
	@schema/embed.sh schema/codebook.csv $(MIGRATIONS) >$@

# --- the program ------------------------------------------------------------------------------

.PHONY: build packages test-packages asan install man clean help
build: build/incisura

build/incisura: build/release/incisura
	@cp --remove-destination $< $@

packages:
	@.ci/packages $(BUILD_PACKAGES)

test-packages:
	@.ci/packages $(TEST_PACKAGES)

asan: build/asan/incisura

man: build/incisura.1
build/incisura.1: build/incisura
	@$< help --man >$@

install: build man
	@install -d $(DESTDIR)$(PREFIX)/bin $(DESTDIR)$(PREFIX)/share/man/man1
	@install -m 755 build/incisura $(DESTDIR)$(PREFIX)/bin/incisura
	@install -m 644 build/incisura.1 $(DESTDIR)$(PREFIX)/share/man/man1/incisura.1

clean:
	@rm -rf build

help:
	@echo 'make            build build/incisura'
	@echo 'make demo       install what is missing, build, make a demo case and open it'
	@echo 'make demo-live  the same operation live: the theatre plays, the live screen waits for keys'
	@echo 'make test       install what tests need and run them all'
	@echo 'make bench      measure speed against a plain loop over the same samples'
	@echo 'make fuzz       run every fuzzer for FUZZ_SECONDS (60)'
	@echo 'make asan       build/asan/incisura, with AddressSanitizer and UBSan'
	@echo 'make lint       cppcheck and clang-format, no changes;  make format  changes'
	@echo 'make layers     fail on an include that climbs the house'
	@echo 'make install    into PREFIX (/usr/local)'

# --- the demo's simulated theatre -------------------------------------------------------------

.PHONY: demo demo-case demo-live demo-programs
DEMO_SOURCES := $(wildcard demo/*.c)
build/demo/%.o: demo/%.c
	@mkdir -p $(@D)
	@$(CC) $(BASE_CFLAGS) -Idemo $(release_CFLAGS) -c $< -o $@
build/theatre: $(DEMO_SOURCES:demo/%.c=build/demo/%.o) $(release_LIB)
	@$(CC) $^ $(LIBS) -o $@
-include $(DEMO_SOURCES:demo/%.c=build/demo/%.d)

demo-case: build build/theatre
	@demo/prepare

demo: packages
	@$(MAKE) -j$$(nproc) demo-case
	@demo/open

demo-programs: build build/theatre
	@:

demo-live: packages
	@$(MAKE) -j$$(nproc) demo-programs
	@demo/live

# --- tests ------------------------------------------------------------------------------------

.PHONY: test test-programs fuzzers fuzz bench layers lint format
SUITES := unit published robustness
# -Wconversion and -Wundef warn inside Criterion's own macros.
TEST_CFLAGS := $(BASE_CFLAGS) $(asan_CFLAGS) -Wno-conversion -Wno-undef -Itests
TEST_LIBS := -lcriterion -ledf -lbiosig -lvterm $(LIBS)

build/tests/%.o: tests/%.c
	@mkdir -p $(@D)
	@$(CC) $(TEST_CFLAGS) -c $< -o $@

define suite
$(1)_OBJECTS := $(patsubst tests/%.c,build/tests/%.o,$(wildcard tests/$(1)/*.c))
build/tests/suite-$(1): $$($(1)_OBJECTS) $$(asan_SCREENS) $$(asan_LIB)
	@$$(CC) $$(asan_CFLAGS) $$^ $$(TEST_LIBS) -o $$@
-include $$($(1)_OBJECTS:.o=.d)
endef
$(foreach s,$(SUITES),$(eval $(call suite,$(s))))

# The terminal driver is a plain program: a pseudo-terminal, libvterm and the real binary.
TERMINAL_TESTS := $(patsubst tests/%.c,build/tests/%,$(wildcard tests/terminal/test_*.c))
build/tests/terminal/test_%: build/tests/terminal/test_%.o build/tests/terminal/screen.o \
                             $(asan_SCREENS) $(asan_LIB)
	@$(CC) $(asan_CFLAGS) $^ -lvterm -lutil $(LIBS) -o $@
-include $(TERMINAL_TESTS:=.d)

FUZZERS := $(patsubst tests/fuzz/%.c,build/fuzz/%,$(wildcard tests/fuzz/fuzz_*.c))
build/fuzz/fuzz_%: tests/fuzz/fuzz_%.c $(fuzz_LIB)
	@mkdir -p $(@D)
	@$(CLANG) $(BASE_CFLAGS) $(fuzz_CFLAGS) -fsanitize=fuzzer $^ $(LIBS) -o $@

test-programs: build asan build/theatre $(foreach s,$(SUITES),build/tests/suite-$(s)) \
               $(TERMINAL_TESTS) fuzzers
fuzzers: $(FUZZERS)

test: test-packages
	@$(MAKE) -j$$(nproc) test-programs
	@tests/run

fuzz: fuzzers
	@tests/fuzz/run $(FUZZ_SECONDS)

BENCHES := $(patsubst tests/bench/%.c,build/bench/%,$(wildcard tests/bench/*.c))
build/bench/%: tests/bench/%.c $(release_SCREENS) $(release_LIB)
	@mkdir -p $(@D)
	@$(CC) $(BASE_CFLAGS) $(release_CFLAGS) $^ $(LIBS) -o $@
-include $(BENCHES:=.d)

bench: build build/theatre $(BENCHES)
	@tests/bench/run

layers:
	@tests/layers

lint:
	@cppcheck --quiet --error-exitcode=1 --std=c11 --inline-suppr -Isrc \
	    --enable=warning,portability --suppress=missingIncludeSystem src demo
	@clang-format --dry-run -Werror $$(git ls-files '*.[ch]')

format:
	@clang-format -i $$(git ls-files '*.[ch]')
