# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
#
# GNU make. For users:   deps demo check all install uninstall dist clean
#           for authors: bench lint sanitize valgrind fuzz, and .ci/run for all of it
# Files are found by their place, so a new one needs no line here:
#   src/*.c src/*/*.c   the library        src/cli/*.c     the program
#   tests/test_*.c      a cmocka program   tests/*.py *.sh a TAP script, given the program as $1
# Settings: CC=gcc|clang  CFLAGS  BUILD=folder  MPI=1  PREFIX  DESTDIR  JOBS=tests at a time  V=1

ifeq ($(origin CC),default)
CC := gcc
endif
# MPI=1 builds a program that runs on several processes, in a folder of its own.
ifeq ($(MPI),1)
BUILD  ?= build/mpi
else
BUILD  ?= build
endif
PREFIX ?= /usr/local
CFLAGS ?= -O2 -g
PYTHON ?= $(firstword $(wildcard /usr/bin/python3) python3)
JOBS   ?= $(shell nproc 2>/dev/null || echo 1)

VERSION := $(shell sed -n 's/^.define TH_VERSION "\(.*\)"/\1/p' include/twinhorizon/version.h)
SONAME  := libtwinhorizon.so.$(firstword $(subst ., ,$(VERSION)))

# ---- what must be installed: the only list ---------------------------------------------------
# Debian packages, and for other systems the same in words with the oldest version tried.
RUN_PACKAGES    := make gcc libc6-dev pkg-config liblapacke-dev libopenblas-dev libgsl-dev libinih-dev \
                   libhdf5-dev gnuplot-nox
TEST_PACKAGES   := libcmocka-dev python3 python3-numpy python3-scipy python3-mpmath python3-h5py python3-matplotlib python3-qcelemental \
                   octave git man-db
AUTHOR_PACKAGES := clang clang-format cppcheck shellcheck valgrind libopenmpi-dev openmpi-bin
RUN_WORDS       := make 4.3, gcc 12 or clang 14, pkg-config, LAPACKE 3.11, OpenBLAS 0.3.21, GSL 2.7, inih 55, \
                   HDF5 1.10.8 with its high-level library, gnuplot 5.4 with cairo (for figures, at run time)
TEST_WORDS      := cmocka 1.1.5, python 3.11 with numpy 1.24, scipy 1.10, mpmath 1.2, h5py 3.7, matplotlib 3.6 and qcelemental, \
                   Octave 7.3, git, man
AUTHOR_WORDS    := clang 14, clang-format 14, cppcheck 2.10, shellcheck 0.9, valgrind 3.19, Open MPI 4.1

# $(call install,packages,words,needed commands)
install = sh tests/deps '$(1)' '$(2)' '$(3)'

# ---- flags -----------------------------------------------------------------------------------
LANGUAGE := -std=c11 -D_POSIX_C_SOURCE=200809L -pthread
WARNINGS := -Wall -Wextra -Wpedantic -Wshadow -Wconversion -Wstrict-prototypes \
            -Wmissing-prototypes -Werror
# Asked once, and only when something is compiled; GSL uses OpenBLAS's cblas instead of its own.
PKG_CFLAGS = $(eval PKG_CFLAGS := $(shell pkg-config --cflags lapacke openblas gsl inih))$(PKG_CFLAGS)
LIBS       = $(eval LIBS := $(filter-out -lgslcblas -lm,$(shell pkg-config --libs gsl lapacke \
             openblas inih)) -pthread -lm)$(LIBS)
# HDF5 is for the program alone: users of the library need none.
HDF5_CFLAGS = $(eval HDF5_CFLAGS := $(shell pkg-config --cflags hdf5))$(HDF5_CFLAGS)
HDF5_LIBS   = $(eval HDF5_LIBS := -lhdf5_hl $(shell pkg-config --libs hdf5))$(HDF5_LIBS)
COMPILE    = $(CC) $(LANGUAGE) $(WARNINGS) $(CFLAGS) -fPIC -MMD -MP $(INCLUDES) $(PKG_CFLAGS) -c
LINK       = $(CC) $(CFLAGS) $(LDFLAGS)
SAY        = $(if $(V),,@echo "  $@"; )

# ---- files -----------------------------------------------------------------------------------
CLI_SOURCES   := $(wildcard src/cli/*.c)
LIB_SOURCES   := $(filter-out $(CLI_SOURCES),$(wildcard src/*.c src/*/*.c))
TEST_SOURCES  := $(wildcard tests/test_*.c)
SCRIPTS       := $(wildcard tests/*.py tests/*.sh)
HEADERS       := $(wildcard include/twinhorizon/*.h)

LIB_OBJECTS := $(LIB_SOURCES:%.c=$(BUILD)/%.o)
CLI_OBJECTS := $(CLI_SOURCES:%.c=$(BUILD)/%.o)
TESTS       := $(TEST_SOURCES:%.c=$(BUILD)/%)
ARCHIVE     := $(BUILD)/libtwinhorizon.a
SHARED      := $(BUILD)/libtwinhorizon.so
PROGRAM     := $(BUILD)/twinhorizon
MANUALS     := $(BUILD)/twinhorizon.1 $(BUILD)/twinhorizon-case.5

# A make of its own, which sees what the line before it has installed.
AGAIN = +@$(MAKE) --no-print-directory $(if $(findstring -j,$(MAKEFLAGS)),,-j$(JOBS))

.PHONY: all deps demo demo-run check tests run-tests run-c-tests bench lint sanitize valgrind fuzz \
        install uninstall dist clean
.DELETE_ON_ERROR:
.SECONDARY:

all: $(ARCHIVE) $(SHARED) $(PROGRAM) $(MANUALS)

# ---- building --------------------------------------------------------------------------------
# The program sees public headers only; library and tests also see private ones.
$(CLI_OBJECTS): INCLUDES := -Iinclude
$(BUILD)/src/cli/modes_file.o: INCLUDES = -Iinclude $(HDF5_CFLAGS)
ifeq ($(MPI),1)
$(BUILD)/src/cli/ranks.o: INCLUDES := -Iinclude -DTH_WITH_MPI $(shell pkg-config --cflags ompi-c)
$(PROGRAM): MORE_LIBS = $(shell pkg-config --libs ompi-c)
endif
INCLUDES := -Iinclude -Isrc -Itests

$(BUILD)/%.o: %.c Makefile
	@mkdir -p $(@D)
	$(SAY)$(COMPILE) $< -o $@

$(ARCHIVE): $(LIB_OBJECTS)
	@rm -f $@
	$(SAY)ar qcs $@ $^

$(SHARED): $(LIB_OBJECTS) src/twinhorizon.map
	$(SAY)$(LINK) -shared -Wl,-z,defs -Wl,-soname,$(SONAME) \
	    -Wl,--version-script=src/twinhorizon.map $(LIB_OBJECTS) $(LIBS) -o $@

$(PROGRAM): $(CLI_OBJECTS) $(ARCHIVE)
	$(SAY)$(LINK) $^ $(LIBS) $(HDF5_LIBS) $(MORE_LIBS) -o $@

# The page of the case file comes from the tables that the program reads with.
$(BUILD)/twinhorizon.1: src/cli/twinhorizon.1 include/twinhorizon/version.h
	@sed 's|@VERSION@|$(VERSION)|' $< > $@

$(BUILD)/twinhorizon-case.5: $(PROGRAM)
	@$(PROGRAM) --case-manual > $@

# A test that includes refuse.h stands between the library and its allocator.
$(BUILD)/tests/test_%: $(BUILD)/tests/test_%.o $(ARCHIVE)
	$(SAY)$(LINK) $^ $(if $(shell grep -l '"refuse.h"' tests/test_$*.c), \
	    $(addprefix -Wl$(comma)--wrap=,calloc malloc realloc)) $(LIBS) -lcmocka -o $@
comma := ,

-include $(patsubst %.c,$(BUILD)/%.d,$(LIB_SOURCES) $(CLI_SOURCES) $(TEST_SOURCES))

# ---- using and testing -----------------------------------------------------------------------
deps:
	@$(call install,$(RUN_PACKAGES) $(TEST_PACKAGES),$(RUN_WORDS); $(TEST_WORDS),$(CC) pkg-config python3 git)

demo:
	@$(call install,$(RUN_PACKAGES),$(RUN_WORDS),$(CC) pkg-config)
	$(AGAIN) all
	@sh tests/demo $(PROGRAM) cases/guide.ini $(BUILD)/demo

check: deps
	$(AGAIN) all tests
	@PYTHON=$(PYTHON) JOBS=$(JOBS) bash tests/run $(PROGRAM) $(TESTS) $(SCRIPTS)

tests: $(TESTS)

bench: deps
	$(AGAIN) all
	@$(PYTHON) tests/bench/run.py $(PROGRAM)

# The C tests under address, leak and undefined-behaviour checks, in a build of their own.
sanitize:
	$(AGAIN) BUILD=$(BUILD)/sanitize run-c-tests CFLAGS="-O2 -g -fno-omit-frame-pointer \
	    -fsanitize=address,undefined -fno-sanitize-recover=all"

run-c-tests: tests
	@JOBS=$(JOBS) ASAN_OPTIONS=detect_leaks=1 bash tests/run - $(TESTS)

valgrind: tests
	@JOBS=$(JOBS) WRAPPER="valgrind -q --error-exitcode=99 --leak-check=full" \
	    bash tests/run - $(TESTS)

# SECONDS for each reader of foreign bytes; FUZZ=case fuzzes one of them. Needs clang.
SECONDS := 60
FUZZERS := $(patsubst tests/fuzz/%.c,$(BUILD)/fuzz/%,$(wildcard tests/fuzz/fuzz_*.c))
fuzz: all $(FUZZERS)
	bash tests/fuzz/run $(BUILD)/fuzz $(SECONDS) $(FUZZ)

$(BUILD)/fuzz/%: tests/fuzz/%.c $(LIB_SOURCES) $(HEADERS)
	@mkdir -p $(@D)
	$(SAY)clang $(LANGUAGE) $(WARNINGS) -O1 -g -D_GNU_SOURCE -fsanitize=fuzzer,address,undefined \
	    -fno-sanitize-recover=all -Iinclude -Isrc -Itests/fuzz $(PKG_CFLAGS) $< $(LIB_SOURCES) $(LIBS) -o $@

lint: all
	@$(call install,$(AUTHOR_PACKAGES),$(AUTHOR_WORDS),clang-format cppcheck shellcheck)
	clang-format --dry-run -Werror $(wildcard src/*.[ch] src/*/*.[ch] tests/*.[ch] tests/fuzz/*.[ch]) $(HEADERS)
	cppcheck --quiet --error-exitcode=1 --std=c11 --enable=warning,performance,portability \
	    --inline-suppr --suppress=missingIncludeSystem -Iinclude -Isrc src
	shellcheck .ci/run $(wildcard tests/run tests/deps tests/demo tests/fuzz/run tests/*.sh)
	shellcheck -s bash src/cli/completion.bash
	bash tests/check_house.sh $(PROGRAM)

# ---- installing ------------------------------------------------------------------------------
install: all
	install -d $(DESTDIR)$(PREFIX)/bin $(DESTDIR)$(PREFIX)/lib/pkgconfig \
	    $(DESTDIR)$(PREFIX)/include/twinhorizon $(DESTDIR)$(PREFIX)/share/man/man1 \
	    $(DESTDIR)$(PREFIX)/share/man/man5 $(DESTDIR)$(PREFIX)/share/bash-completion/completions
	install -m 644 $(BUILD)/twinhorizon.1 $(DESTDIR)$(PREFIX)/share/man/man1/
	install -m 644 $(BUILD)/twinhorizon-case.5 $(DESTDIR)$(PREFIX)/share/man/man5/
	install -m 644 src/cli/completion.bash \
	    $(DESTDIR)$(PREFIX)/share/bash-completion/completions/twinhorizon
	install -m 755 $(PROGRAM) $(DESTDIR)$(PREFIX)/bin/
	install -m 644 $(ARCHIVE) $(DESTDIR)$(PREFIX)/lib/
	install -m 755 $(SHARED) $(DESTDIR)$(PREFIX)/lib/libtwinhorizon.so.$(VERSION)
	ln -sf libtwinhorizon.so.$(VERSION) $(DESTDIR)$(PREFIX)/lib/$(SONAME)
	ln -sf $(SONAME) $(DESTDIR)$(PREFIX)/lib/libtwinhorizon.so
	install -m 644 $(HEADERS) $(DESTDIR)$(PREFIX)/include/twinhorizon/
	sed 's|@PREFIX@|$(PREFIX)|; s|@VERSION@|$(VERSION)|; s|@LIBS@|$(LIBS)|' src/twinhorizon.pc.in \
	    > $(DESTDIR)$(PREFIX)/lib/pkgconfig/twinhorizon.pc

uninstall:
	rm -f $(DESTDIR)$(PREFIX)/bin/twinhorizon $(DESTDIR)$(PREFIX)/lib/libtwinhorizon.a \
	    $(DESTDIR)$(PREFIX)/lib/libtwinhorizon.so $(DESTDIR)$(PREFIX)/lib/$(SONAME) \
	    $(DESTDIR)$(PREFIX)/lib/libtwinhorizon.so.$(VERSION) \
	    $(DESTDIR)$(PREFIX)/lib/pkgconfig/twinhorizon.pc \
	    $(DESTDIR)$(PREFIX)/share/man/man1/twinhorizon.1 \
	    $(DESTDIR)$(PREFIX)/share/man/man5/twinhorizon-case.5 \
	    $(DESTDIR)$(PREFIX)/share/bash-completion/completions/twinhorizon
	rm -rf $(DESTDIR)$(PREFIX)/include/twinhorizon

# What is tracked at this commit, as one file that builds and passes its tests by itself.
dist:
	@mkdir -p $(BUILD)
	git archive --format=tar.gz --prefix=twinhorizon-$(VERSION)/ \
	    -o $(BUILD)/twinhorizon-$(VERSION).tar.gz HEAD

clean:
	rm -rf $(BUILD)
