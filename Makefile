# limnograph. `make` alone says what can be made.

BUILD   ?= target
PROFILE ?= release
PREFIX  ?= /usr/local
LIBDIR  ?= $(PREFIX)/lib
DESTDIR ?=
RANKS   ?= 2
# WITH_MPI=no leaves out the library with MPI, and with it all need for MPI.
WITH_MPI ?= yes

MPICC  ?= mpicc
MPIF90 ?= mpif90
CFLAGS  ?= -O3
FFLAGS  ?= -O3
CARGO  ?= $(or $(shell command -v cargo),$(wildcard $(HOME)/.cargo/bin/cargo),cargo)
export PATH := $(PATH):$(HOME)/.cargo/bin
export BUILD MPICC MPIF90

VERSION := $(shell sed -n 's/^version = "\(.*\)"/\1/p' Cargo.toml | head -n 1)
MAJOR   := $(firstword $(subst ., ,$(VERSION)))
LIB     := $(BUILD)/lib
HOST    := $(BUILD)/host
PROGRAM := $(BUILD)/bin/limnograph
PYTHON  := $(BUILD)/python/bin/python
ALONE   := $(BUILD)/alone/$(PROFILE)
MPI     := $(BUILD)/mpi/$(PROFILE)
HEADERS := $(wildcard include/*.h)
# A build of its own for each library, so that neither throws away what the other has compiled.
CARGO_ALONE := --locked --target-dir $(BUILD)/alone
CARGO_MPI   := --locked --target-dir $(BUILD)/mpi --no-default-features --features mpi
MPI_IF_WANTED := $(if $(filter yes,$(WITH_MPI)),limnograph_mpi)
say = @printf '\n== %s\n'

.DEFAULT_GOAL := help
.DELETE_ON_ERROR:
.SUFFIXES:
.PHONY: help demo test bench install libraries program hosts clean FORCE \
	prepare-base prepare-mpi prepare-hosts prepare-tests \
	test-format test-lints test-rust test-mpi test-hosts test-python

help:
	@echo 'make demo              build all, run Saltmarsh on $(RANKS) ranks (RANKS=…), show what was recorded'
	@echo 'make test              check everything; parts: test-format test-lints test-rust test-mpi'
	@echo '                       test-hosts test-python'
	@echo 'make bench             measure what the library costs'
	@echo 'make install           libraries, headers, Fortran module source, program, pkg-config files to'
	@echo '                       PREFIX=$(PREFIX) (DESTDIR=… before it; WITH_MPI=no without MPI)'
	@echo 'make libraries         only build $(LIB)/liblimnograph{,_mpi}.{a,so}'
	@echo 'make program           only build $(PROGRAM)'
	@echo 'make hosts             only build the programs in ffi-examples, to $(HOST)'
	@echo 'make clean             remove $(BUILD)'
	@echo
	@echo 'MPICC and MPIF90 name other MPI compilers, MPIRUN another mpirun, BUILD another place to build in.'

# --- Tools --------------------------------------------------------------------------------------------

prepare-base:
	@scripts/prepare.sh base
prepare-mpi:
	@scripts/prepare.sh base mpi
	@scripts/same-mpi.sh
prepare-hosts:
	@scripts/prepare.sh base mpi hosts
	@scripts/same-mpi.sh
prepare-tests:
	@scripts/prepare.sh base mpi hosts tests
	@scripts/same-mpi.sh

# --- Libraries and program ----------------------------------------------------------------------------

# Cargo knows best what has changed, so it is always asked; it leaves its files alone when nothing has.
$(ALONE)/liblimnograph.a $(ALONE)/liblimnograph.so $(ALONE)/limnograph &: FORCE | prepare-base
	@$(CARGO) build --profile $(PROFILE) $(CARGO_ALONE)
$(MPI)/liblimnograph.a $(MPI)/liblimnograph.so &: FORCE | prepare-mpi
	@$(CARGO) build --profile $(PROFILE) $(CARGO_MPI) --lib

$(LIB)/liblimnograph.a: $(ALONE)/liblimnograph.a scripts/localise.sh
	@scripts/localise.sh $< $@
$(LIB)/liblimnograph_mpi.a: $(MPI)/liblimnograph.a scripts/localise.sh
	@scripts/localise.sh $< $@

$(LIB)/liblimnograph.so: $(ALONE)/liblimnograph.so
$(LIB)/liblimnograph_mpi.so: $(MPI)/liblimnograph.so
# The file, the name that programs record, and the name that the linker looks for.
$(LIB)/%.so:
	@mkdir -p $(@D)
	@install -m 755 $< $@.$(VERSION)
	@ln -sf $(@F).$(VERSION) $@.$(MAJOR)
	@ln -sf $(@F).$(MAJOR) $@
	@touch $@.$(VERSION)

$(PROGRAM): $(ALONE)/limnograph
	@mkdir -p $(@D)
	@install -m 755 $< $@

libraries: $(foreach name,limnograph $(MPI_IF_WANTED),$(LIB)/lib$(name).a $(LIB)/lib$(name).so)
program: $(PROGRAM)

# --- Hosts --------------------------------------------------------------------------------------------

# One program a file; a folder is a program of all its files.
C_HOSTS       := $(patsubst ffi-examples/%.c,$(HOST)/%,$(wildcard ffi-examples/*.c))
FORTRAN_HOSTS := $(patsubst ffi-examples/%.f90,$(HOST)/%,$(wildcard ffi-examples/*.f90))
SALTMARSH     := $(HOST)/saltmarsh
SALTMARSH_SOURCES := $(wildcard ffi-examples/saltmarsh/*.c)
SALTMARSH_OBJECTS := $(patsubst ffi-examples/%.c,$(HOST)/objects/%.o,$(SALTMARSH_SOURCES))
# The shared libraries are found where they were built.
LINK_ALONE := -L$(LIB) -Wl,-rpath,$(abspath $(LIB)) -llimnograph
LINK_MPI   := -L$(LIB) -Wl,-rpath,$(abspath $(LIB)) -llimnograph_mpi
C_STRICT   := -std=c99 -Wall -Wextra -Iinclude
F_STRICT   := -std=f2008 -Wall -Wextra

hosts: $(C_HOSTS) $(FORTRAN_HOSTS) $(if $(SALTMARSH_SOURCES),$(SALTMARSH))

$(C_HOSTS): $(HOST)/%: ffi-examples/%.c $(HEADERS) | prepare-hosts $(LIB)/liblimnograph.so
	@mkdir -p $(@D)
	@echo 'Building $@'
	@$(CC) $(C_STRICT) $(CFLAGS) $< -o $@ $(LINK_ALONE) -lm

$(FORTRAN_HOSTS): $(HOST)/%: ffi-examples/%.f90 include/limnograph.f90 | prepare-hosts $(LIB)/liblimnograph_mpi.so
	@mkdir -p $(HOST)/objects/$*
	@echo 'Building $@'
	@$(MPIF90) $(F_STRICT) $(FFLAGS) -J$(HOST)/objects/$* include/limnograph.f90 $< -o $@ $(LINK_MPI)

$(HOST)/objects/saltmarsh/%.o: ffi-examples/saltmarsh/%.c | prepare-hosts
	@mkdir -p $(@D)
	@$(MPICC) $(C_STRICT) $(CFLAGS) -MMD -MP -c $< -o $@
$(SALTMARSH): $(SALTMARSH_OBJECTS) | $(LIB)/liblimnograph_mpi.so
	@echo 'Building $@'
	@$(MPICC) $^ -o $@ $(LINK_MPI) -lfftw3_mpi -lfftw3 -lm
-include $(SALTMARSH_OBJECTS:.o=.d)

# --- Demo ---------------------------------------------------------------------------------------------

DEMO := $(BUILD)/demo
demo: prepare-hosts $(SALTMARSH) $(PROGRAM)
	@rm -rf $(DEMO)
	@mkdir -p $(DEMO)
	$(say) 'Saltmarsh: a small universe on $(RANKS) ranks, recorded in $(DEMO)/saltmarsh.limno'
	@scripts/mpirun.sh $(RANKS) $(SALTMARSH) \
		--config ffi-examples/saltmarsh/limnograph.toml --series $(DEMO)/saltmarsh.limno
	@echo
	@$(PROGRAM) sight $(DEMO)/saltmarsh.limno
	@echo
	@echo 'Try next:'
	@echo '  $(PROGRAM) export $(DEMO)/saltmarsh.limno --to csv -o saltmarsh.csv'
	@echo '  $(PROGRAM) audit $(DEMO)/saltmarsh.limno'
	@echo '  $(PROGRAM) lint ffi-examples/saltmarsh/limnograph.toml'
	@echo '  $(PROGRAM) --help'

# --- Tests --------------------------------------------------------------------------------------------

test: prepare-tests
	@+scripts/test.sh format lints rust mpi hosts python

test-format:
	@$(CARGO) fmt --check
	@echo '1 passed, 0 failed'
test-lints: prepare-mpi
	@$(CARGO) clippy --quiet $(CARGO_ALONE) --all-targets -- -D warnings
	@$(CARGO) clippy --quiet $(CARGO_MPI) --all-targets -- -D warnings
	@echo '2 passed, 0 failed'
test-rust: prepare-base
	@$(CARGO) test $(CARGO_ALONE)
test-mpi: prepare-hosts
	@$(CARGO) test $(CARGO_MPI) --lib --test 'mpi_*'
test-hosts: prepare-tests libraries program hosts
	@scripts/test-hosts.sh
test-python: prepare-tests $(PYTHON) libraries $(PROGRAM) $(SALTMARSH)
	@scripts/test-python.sh

$(PYTHON): tests/astropy/requirements.txt | prepare-tests
	$(say) 'A virtual environment for the checks against astropy and scipy'
	@rm -rf $(BUILD)/python
	@python3 -m venv $(BUILD)/python
	@$(PYTHON) -m pip install --quiet --disable-pip-version-check -r $<
	@touch $@

# --- Benchmarks ---------------------------------------------------------------------------------------

# As fast as the compiler makes the rivals on this machine; sums stay in the order written.
BENCH       := $(BUILD)/bench
BENCH_FLAGS := -std=gnu11 -O3 -march=native -fopenmp -Wall -Wextra -Iinclude
BENCH_HOST  := library arrays quantities statistics
BENCH_OF     = $(patsubst %,$(BENCH)/objects/%.o,$(1))
BENCH_PROGRAMS := $(addprefix $(BENCH)/,sweep growth stations fixed_cost fixed_cost_mpi ranks libarrays.so)

$(BENCH)/objects/%.o: bench/%.c $(wildcard bench/*.h) $(HEADERS) | prepare-hosts
	@mkdir -p $(@D)
	@$(CC) $(BENCH_FLAGS) -c $< -o $@
$(BENCH)/objects/%_mpi.o: bench/%.c $(wildcard bench/*.h) $(HEADERS) | prepare-hosts
	@mkdir -p $(@D)
	@$(MPICC) $(BENCH_FLAGS) -DWITH_MPI -c $< -o $@

$(BENCH)/sweep: $(call BENCH_OF,sweep read_limit fused one_loop_each tuned $(BENCH_HOST))
$(BENCH)/growth: $(call BENCH_OF,growth $(BENCH_HOST))
$(BENCH)/stations: $(call BENCH_OF,stations $(BENCH_HOST))
$(BENCH)/fixed_cost: $(call BENCH_OF,fixed_cost $(BENCH_HOST))
$(BENCH)/fixed_cost_mpi: $(call BENCH_OF,fixed_cost_mpi $(BENCH_HOST))
$(BENCH)/ranks: $(call BENCH_OF,ranks_mpi $(BENCH_HOST))
$(BENCH)/sweep $(BENCH)/growth $(BENCH)/stations $(BENCH)/fixed_cost: | $(LIB)/liblimnograph.so
	@$(CC) -fopenmp $^ -o $@ $(LINK_ALONE) -lm
$(BENCH)/fixed_cost_mpi $(BENCH)/ranks: | $(LIB)/liblimnograph_mpi.so
	@$(MPICC) -fopenmp $^ -o $@ $(LINK_MPI) -lm
# The same arrays and calls for Python.
$(BENCH)/libarrays.so: $(patsubst %,bench/%.c,$(BENCH_HOST)) $(wildcard bench/*.h) $(HEADERS) | $(LIB)/liblimnograph.so
	@mkdir -p $(@D)
	@$(CC) $(BENCH_FLAGS) -shared -fPIC $(filter %.c,$^) -o $@ $(LINK_ALONE) -lm

bench: prepare-hosts libraries program $(SALTMARSH) $(BENCH_PROGRAMS) $(PYTHON)
	@bench/run.sh

# --- Install ------------------------------------------------------------------------------------------

TO := $(DESTDIR)$(PREFIX)
TO_LIB := $(DESTDIR)$(LIBDIR)
# What a static link needs besides, as rustc and the MPI compiler say it.
PRIVATE_ALONE := -lgcc_s -lutil -lrt -lpthread -lm -ldl -lc
PRIVATE_MPI = $(filter -L% -l% -Wl$(comma)%,$(shell $(MPICC) -show)) $(PRIVATE_ALONE)
comma := ,
# Programs find a library in an unusual place by themselves.
RPATH := $(if $(filter /usr /usr/local,$(PREFIX)),,-Wl,-rpath,$${libdir})

install: libraries program
	@install -d $(TO)/bin $(TO)/include $(TO_LIB)/pkgconfig $(TO)/share/doc/limnograph
	@install -m 755 $(PROGRAM) $(TO)/bin/
	@install -m 644 include/limnograph.h $(if $(MPI_IF_WANTED),include/limnograph_mpi.h) \
		include/limnograph.f90 $(TO)/include/
	@install -m 644 LICENSE-MIT LICENSE-APACHE $(TO)/share/doc/limnograph/
	@for name in limnograph $(MPI_IF_WANTED); do \
		install -m 644 $(LIB)/lib$$name.a $(TO_LIB)/ && \
		install -m 755 $(LIB)/lib$$name.so.$(VERSION) $(TO_LIB)/ && \
		ln -sf lib$$name.so.$(VERSION) $(TO_LIB)/lib$$name.so.$(MAJOR) && \
		ln -sf lib$$name.so.$(MAJOR) $(TO_LIB)/lib$$name.so || exit 1; \
	done
	@sed $(call FILL,limnograph,one process,$(PRIVATE_ALONE)) packaging/limnograph.pc.in \
		>$(TO_LIB)/pkgconfig/limnograph.pc
	$(if $(MPI_IF_WANTED),@sed $(call FILL,limnograph_mpi,with MPI,$(PRIVATE_MPI)) packaging/limnograph.pc.in \
		>$(TO_LIB)/pkgconfig/limnograph_mpi.pc)
	@echo 'limnograph $(VERSION) is in $(TO)'

FILL = -e 's|@PREFIX@|$(PREFIX)|' -e 's|@INCLUDEDIR@|$(PREFIX)/include|' -e 's|@LIBDIR@|$(LIBDIR)|' \
	-e 's|@VERSION@|$(VERSION)|' -e 's|@RPATH@|$(RPATH)|' \
	-e 's|@NAME@|$(1)|' -e 's|@KIND@|$(2)|' -e 's|@PRIVATE@|$(3)|'

clean:
	rm -rf $(BUILD)
