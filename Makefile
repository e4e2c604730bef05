# SPDX-License-Identifier: GPL-3.0-or-later
# Underfoot. `make demo` and `make check` are all a newcomer needs; `make help` lists the rest.

# Short lines unless asked: make V=1 shows every command.
ifeq ($(V),1)
say =
else
.SILENT:
say = @echo "  $(1)"
endif

PREFIX  ?= /usr/local
DESTDIR ?=
FLAVOUR ?= release
BUILD   := build/$(FLAVOUR)

# ---- what each flavour is made with -----------------------------------------------------------

CC ?= gcc
ifeq ($(origin CC),default)
CC := gcc
endif

LIBRARIES := libtiff-4 libpng fftw3f gsl jansson libxxhash expat
HAVE_LIBRARIES := $(shell pkg-config --exists $(LIBRARIES) 2>/dev/null && echo yes)
ifeq ($(HAVE_LIBRARIES),yes)
LIB_CFLAGS := $(shell pkg-config --cflags $(LIBRARIES))
LIB_LINK   := $(shell pkg-config --libs $(LIBRARIES)) -lcsv
endif

# The same bytes everywhere: ISO C11 and no contraction of a*b+c, whichever the compiler.
STANDARD := -std=c11 -D_POSIX_C_SOURCE=200809L -ffp-contract=off
WARNINGS := -Wall -Wextra -Wconversion -Wshadow -Wstrict-prototypes -Wmissing-prototypes -Wvla $(WERROR)
COMMON   := $(STANDARD) $(WARNINGS) -fPIC -fvisibility=hidden -pthread -Iinclude -Isrc -I$(BUILD)/generated

HARDENED      := -D_FORTIFY_SOURCE=2 -fstack-protector-strong -fstack-clash-protection
HARDENED_LINK := -Wl,-z,relro -Wl,-z,now -pie

FLAGS_release := -O3 -g $(HARDENED)
LINK_release  := $(HARDENED_LINK)
FLAGS_debug   := -O0 -g3
FLAGS_asan    := -O1 -g -fno-omit-frame-pointer -fsanitize=address,undefined -fno-sanitize-recover=all
LINK_asan     := -fsanitize=address,undefined
FLAGS_tsan    := -O1 -g -fsanitize=thread
LINK_tsan     := -fsanitize=thread
# What the tests load: every symbol visible, otherwise the release.
FLAGS_probe   := -O3 -g -fvisibility=default
LINK_probe    :=

CFLAGS_ALL = $(COMMON) $(FLAGS_$(FLAVOUR)) $(LIB_CFLAGS) $(CPPFLAGS) $(CFLAGS)
LINK_ALL   = $(LINK_$(FLAVOUR)) $(LDFLAGS)
LINK_LIBS  = $(LIB_LINK) -lm -pthread

# ---- sources ----------------------------------------------------------------------------------

LAYERS  := base record settings image fit optics io correct segment gap measure calibrate sheet stats report scene run
SOURCES := $(sort $(wildcard $(LAYERS:%=src/%/*.c)))
CLI     := $(sort $(wildcard src/cli/*.c))
OBJECTS := $(SOURCES:src/%.c=$(BUILD)/obj/%.o)
CLI_OBJECTS := $(CLI:src/%.c=$(BUILD)/obj/%.o)

# Kernel files are built twice from one source; a table picks at run time (src/image/kernels.h).
MACHINE := $(shell uname -m)
KERNELS := $(filter src/image/kernels_rows.c,$(SOURCES))
ifeq ($(MACHINE),x86_64)
OBJECTS += $(KERNELS:src/%.c=$(BUILD)/obj/%.v3.o)
endif

PROGRAM := $(BUILD)/underfoot
STATIC  := $(BUILD)/libunderfoot.a
SONAME  := libunderfoot.so.0
SHARED  := $(BUILD)/$(SONAME)

.DEFAULT_GOAL := all
.PHONY: bead-truth stats-truth truth cover all debug asan tsan probe build-flavour unit check demo bench install uninstall clean help packages packages-test docs docs-pictures

all: packages ## the command and the libraries, optimised and hardened, in build/release
	@$(MAKE) --no-print-directory FLAVOUR=release build-flavour
debug asan tsan probe: packages ## the same for debugging, or with address+undefined / thread sanitizer
	@$(MAKE) --no-print-directory FLAVOUR=$@ build-flavour

build-flavour: $(PROGRAM) $(STATIC) $(SHARED)

$(PROGRAM): $(CLI_OBJECTS) $(STATIC)
	$(call say,link $@)
	$(CC) $(CFLAGS_ALL) $(LINK_ALL) -o $@ $(CLI_OBJECTS) $(STATIC) $(LINK_LIBS)
$(STATIC): $(OBJECTS)
	@rm -f $@
	$(AR) rcs $@ $^
$(SHARED): $(OBJECTS)
	$(CC) -shared $(filter-out -pie,$(LINK_ALL)) -Wl,-soname,$(SONAME) -o $@ $^ $(LINK_LIBS)
	@ln -sf $(SONAME) $(BUILD)/libunderfoot.so

$(BUILD)/obj/%.o: src/%.c $(BUILD)/flags
	@mkdir -p $(@D)
	$(call say,compile $@)
	$(CC) $(CFLAGS_ALL) $(KERNEL_FLAGS) -MMD -MP -c -o $@ $<
$(BUILD)/obj/%.v3.o: src/%.c $(BUILD)/flags
	@mkdir -p $(@D)
	$(call say,compile $@)
	$(CC) $(CFLAGS_ALL) $(KERNEL_FLAGS) -march=x86-64-v3 -DUF_KERNELS_V3 -MMD -MP -c -o $@ $<
# Without these gcc keeps branches in kernels that could be vectors; they change no result.
$(KERNELS:src/%.c=$(BUILD)/obj/%.o) $(KERNELS:src/%.c=$(BUILD)/obj/%.v3.o): KERNEL_FLAGS := -fno-trapping-math -fno-math-errno

# A change of flags rebuilds everything.
$(BUILD)/flags: FORCE
	@mkdir -p $(@D)
	@echo '$(CC) $(CFLAGS_ALL)' | cmp -s - $@ || echo '$(CC) $(CFLAGS_ALL)' > $@
.PHONY: FORCE

-include $(shell find $(BUILD)/obj -name '*.d' 2>/dev/null)

# ---- what a fresh machine needs ------------------------------------------------------------------

BUILD_PACKAGES := gcc make pkg-config libc6-dev libtiff-dev libpng-dev libfftw3-dev libjansson-dev libxxhash-dev libcsv-dev libgsl-dev libexpat1-dev
TEST_PACKAGES  := clang libcmocka-dev python3 python3-numpy python3-scipy python3-skimage python3-tifffile python3-pytest python3-pil

packages:
	@tests/tools/need-packages $(BUILD_PACKAGES)
packages-test:
	@tests/tools/need-packages $(TEST_PACKAGES)

# ---- demo, tests, benchmarks ------------------------------------------------------------------------

DEMO := build/demo

demo: all ## write the demo experiment, measure it, say where the results are
	@tests/tools/run-demo $(PROGRAM) $(DEMO)

# Test programs, one a file, linked with the flavour's static library.
TEST_SOURCES  := $(sort $(wildcard tests/*/test_*.c))
TEST_PROGRAMS := $(TEST_SOURCES:tests/%.c=$(BUILD)/tests/%)

unit: $(TEST_PROGRAMS)

$(BUILD)/tests/%: tests/%.c $(STATIC)
	@mkdir -p $(@D)
	$(call say,test $@)
	$(CC) $(CFLAGS_ALL) -Itests $(LINK_ALL) -MMD -MP -o $@ $< $(STATIC) $(LINK_LIBS) -lcmocka

-include $(TEST_PROGRAMS:%=%.d)

check: ## all tests; the last line is "N passed, N failed"
	@tests/tools/need-packages $(BUILD_PACKAGES) $(TEST_PACKAGES)
	@$(MAKE) --no-print-directory FLAVOUR=release WERROR=-Werror build-flavour unit
	@$(MAKE) --no-print-directory FLAVOUR=probe build-flavour
	@$(MAKE) --no-print-directory FLAVOUR=asan WERROR=-Werror build-flavour unit
	@$(MAKE) --no-print-directory FLAVOUR=tsan build-flavour
	@$(MAKE) --no-print-directory CC=clang BUILD=build/clang WERROR=-Werror build-flavour
	@tests/tools/run-tests

bench: all packages-test ## speed and peak memory of the main job on a 2048 x 2048 pair
	@tests/bench/bench-measure $(PROGRAM)

# How right the numbers are: tables of errors and of coverage on simulated fields, kept in the repository so that a change
# shows (tests/bench/truth.c).
$(BUILD)/tests/bench/truth: tests/bench/truth.c $(STATIC)
	@mkdir -p $(@D)
	$(call say,bench $@)
	$(CC) $(CFLAGS_ALL) $(LINK_ALL) -MMD -MP -o $@ $< $(STATIC) $(LINK_LIBS)

truth: all ## errors of every figure over a grid of simulated fields, into tests/bench/truth.csv
	@$(MAKE) --no-print-directory FLAVOUR=release $(BUILD)/tests/bench/truth
	$(BUILD)/tests/bench/truth > tests/bench/truth.csv
cover: all ## how often the 95 % intervals hold the truth, into tests/bench/cover.csv
	@$(MAKE) --no-print-directory FLAVOUR=release $(BUILD)/tests/bench/truth
	$(BUILD)/tests/bench/truth cover > tests/bench/cover.csv

$(BUILD)/tests/bench/beads $(BUILD)/tests/bench/stats: $(BUILD)/tests/bench/%: tests/bench/%.c $(STATIC)
	@mkdir -p $(@D)
	$(call say,bench $@)
	$(CC) $(CFLAGS_ALL) $(LINK_ALL) -MMD -MP -o $@ $< $(STATIC) $(LINK_LIBS)
bead-truth: all ## how right calibrate bead is over 200 simulated experiments a row, into tests/bench/beads.csv
	@$(MAKE) --no-print-directory FLAVOUR=release $(BUILD)/tests/bench/beads
	$(BUILD)/tests/bench/beads > tests/bench/beads.csv
stats-truth: all ## false positives and coverage of the statistics on invented experiments, into tests/bench/stats.csv
	@$(MAKE) --no-print-directory FLAVOUR=release $(BUILD)/tests/bench/stats
	$(BUILD)/tests/bench/stats > tests/bench/stats.csv

docs: all ## the pages that come from the tables in the code
	$(PROGRAM) docs settings > docs/settings.md
	$(PROGRAM) docs columns > docs/columns.md
	$(PROGRAM) docs sheet-columns > docs/sheet-columns.md

docs-pictures: demo ## the pictures of README and docs
	@mkdir -p docs/pictures
	$(PROGRAM) optics --wavelength-nm 488 --substrate coverglass --medium culture-medium --objective-na 1.49 --angle-deg 70 \
	    --angle-sd-deg 0.5 --plot docs/pictures/optics-good.png > /dev/null
	cp $(DEMO)/results_a/overlay/day1_a_near.png docs/pictures/overlay.png
	$(PROGRAM) demo build/demo_bench --scenario bench --quiet
	$(PROGRAM) calibrate camera --channel near --dark build/demo_bench/dark_*.tif --flat build/demo_bench/light_*.tif --quiet \
	    --exposures-ms 2,4,8,15,30,60,120,200,300 -o build/demo_bench/near_camera.ini --plot docs/pictures/near_camera.png
	$(PROGRAM) calibrate bead build/demo_bench/beads_*.tif --radius-nm 2500 --radius-sd-nm 25 --quiet \
	    -i build/demo_bench/bench.ini -i build/demo_bench/near_camera.ini -o build/demo_bench/near_bead.ini \
	    --plot docs/pictures/near_bead.png
	$(PROGRAM) sheet layout -o $(DEMO)/plan.csv --treatment 'thrift: 0.1, 1, 10 uM' --treatment 'sedge: 0.1, 1, 10 uM' \
	    --control vehicle --plates 3 --plate-name P --seed 7 --quiet
	cp $(DEMO)/plan_map1.png docs/pictures/plate-map.png
	$(PROGRAM) demo build/demo_screen --scenario screen --quiet
	$(PROGRAM) plate build/demo_screen/sheet.csv -i build/demo_screen/screen1.ini -a build/demo_screen/assay.ini --quiet \
	    -o build/demo_screen/results
	cp build/demo_screen/results/maps/screen1_gap_median_nm.png docs/pictures/plate-gap.png

# ---- install ---------------------------------------------------------------------------------------------

install: all ## into PREFIX (default /usr/local), below DESTDIR
	install -d $(DESTDIR)$(PREFIX)/bin $(DESTDIR)$(PREFIX)/lib $(DESTDIR)$(PREFIX)/include $(DESTDIR)$(PREFIX)/share/doc/underfoot
	install -m 755 $(PROGRAM) $(DESTDIR)$(PREFIX)/bin/underfoot
	install -m 644 $(STATIC) $(DESTDIR)$(PREFIX)/lib/
	install -m 755 $(SHARED) $(DESTDIR)$(PREFIX)/lib/
	ln -sf $(SONAME) $(DESTDIR)$(PREFIX)/lib/libunderfoot.so
	install -m 644 include/underfoot.h $(DESTDIR)$(PREFIX)/include/
	install -m 644 README.md docs/*.md docs/LICENSE docs/LICENSE-font $(DESTDIR)$(PREFIX)/share/doc/underfoot/

uninstall: ## take out what install put in
	rm -f $(DESTDIR)$(PREFIX)/bin/underfoot $(DESTDIR)$(PREFIX)/lib/libunderfoot.a \
	      $(DESTDIR)$(PREFIX)/lib/$(SONAME) $(DESTDIR)$(PREFIX)/lib/libunderfoot.so $(DESTDIR)$(PREFIX)/include/underfoot.h
	rm -rf $(DESTDIR)$(PREFIX)/share/doc/underfoot

clean: ## remove build/
	rm -rf build

help:
	@sed -n 's/^\([a-z][a-z -]*\):[^#]*## \(.*\)/  make \1: \2/p' Makefile

# The tables read better as they stand.
FORMATTED := $(filter-out src/report/font_data.c src/record/columns.c src/settings/table.c,$(wildcard src/*/*.[ch])) include/underfoot.h
.PHONY: format
format: ## clang-format over the sources
	clang-format -i $(FORMATTED)
