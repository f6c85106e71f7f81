! limnograph for Fortran: measures a galaxy-formation run step by step and keeps a durable time
! series of it. In short, for a code that uses MPI (without `communicator` for a process alone):
!
!     call limno_open("limnograph.toml", "box.limno", communicator, run)              once
!
!     mass => gas(1:n_gas)%mass                                                       each step
!     call limno_mark(run, clock)
!     call limno_lend(run, "gas", "mass", mass)
!     call limno_enter(run)
!
!     call limno_close(run)                                                           once
!
! with these declarations:
!
!     use limnograph
!     type(limno_run) :: run
!     type(limno_clock) :: clock
!     type(gas_element), allocatable, target :: gas(:)
!     real(real64), pointer :: mass(:)
!
! Compile this file with the host's own compiler and options, and link the library with or without
! MPI. Fortran 2008 is enough; no MPI module is used here: the communicator is the integer of
! `use mpi`, or comm%MPI_VAL of `use mpi_f08`.
!
!     gfortran -c limnograph.f90
!     gfortran host.f90 limnograph.o -llimnograph       or       mpif90 ... -llimnograph_mpi
!
! The manual is limnograph.h: what it says of a call holds for the call of the same name here. The
! names of species and fields stand there, too. Peculiar to Fortran:
!   - Every subroutine has an optional integer `status`; LIMNO_OK is 0. Without it an error is
!     passed over, as in C when the answer is not looked at: nothing is ever printed or stopped.
!     limno_last_error(run) has the text, also when limno_open failed. Optional arguments are best
!     given by keyword.
!   - Lent is either an allocatable array, all of it: call limno_lend(run, "gas", "mass", mass); or
!     a pointer, which may point at any array or section: mass => gas(1:n)%mass,
!     position => all_positions(1:3, 1:n:2), energy => state(n:1:-1, 5). Nothing is copied. If the
!     compiler finds "no specific subroutine for the generic limno_lend", what is given is neither.
!   - A vector field is lent as an array (3, n); as an array (n, 3) with components_last = .true.;
!     or as three arrays x, y, z, which may point at gas%velocity(1), gas%velocity(2) and
!     gas%velocity(3). It has to be said, because the shape alone cannot tell the first two apart
!     on a rank where n happens to be 3.
!   - An array of higher rank, as meshes have, is lent through a pointer of rank 1 (or of rank 2):
!         flat(1:size(density)) => density
!   - A rank without elements lends arrays of size 0, or does not lend.
!
! The duties of the host, besides those of limnograph.h
!   - What is lent stays where and as it is until limno_sound or limno_enter. An allocatable array
!     is neither deallocated nor given another shape meanwhile. The pointer itself may change.
!   - What a pointer is to point at has the attribute `target` where it is declared.
!   - A dummy argument of the host's own procedure may be a copy made by its caller, gone when the
!     procedure ends: x(n) when a section is handed over, with some compilers also x(:) when that is
!     gas%mass. Lend from where the array is declared, or make the argument a pointer or
!     allocatable.

! The C interface, entry by entry: what stands in limnograph.h, with the same layout. Hosts use
! the module `limnograph` further down.
module limnograph_interface
  use, intrinsic :: iso_c_binding, only: c_char, c_double, c_int32_t, c_int64_t, c_intptr_t, &
    c_null_ptr, c_ptr, c_size_t
  implicit none
  public

  integer(c_int32_t), parameter :: c_header_version = 100_c_int32_t

  integer(c_int32_t), parameter :: c_f32 = 1_c_int32_t
  integer(c_int32_t), parameter :: c_f64 = 2_c_int32_t
  integer(c_int32_t), parameter :: c_i32 = 3_c_int32_t
  integer(c_int32_t), parameter :: c_u32 = 4_c_int32_t
  integer(c_int32_t), parameter :: c_i64 = 5_c_int32_t
  integer(c_int32_t), parameter :: c_u64 = 6_c_int32_t

  type, bind(c) :: c_options
    integer(c_size_t) :: size = 0
    type(c_ptr) :: host_name = c_null_ptr
    type(c_ptr) :: host_version = c_null_ptr
    type(c_ptr) :: description = c_null_ptr
    type(c_ptr) :: config_text = c_null_ptr
    integer(c_int32_t) :: threads = 0
    integer(c_int32_t) :: reserved = 0
  end type c_options

  type, bind(c) :: c_clock
    integer(c_size_t) :: size = 0
    integer(c_int64_t) :: step = 0
    real(c_double) :: time = 0.0_c_double
    real(c_double) :: step_length = 0.0_c_double
    integer(c_int32_t) :: synchronised = 1
    integer(c_int32_t) :: checkpoint = 0
  end type c_clock

  type, bind(c) :: c_array
    integer(c_size_t) :: size = 0
    integer(c_int32_t) :: scalar = 0
    integer(c_int32_t) :: components = 1
    type(c_ptr) :: data = c_null_ptr
    type(c_ptr) :: arrays = c_null_ptr
    integer(c_intptr_t) :: stride = 0
    integer(c_intptr_t) :: component_stride = 0
  end type c_array

  type, bind(c) :: c_tally_batch
    integer(c_size_t) :: size = 0
    type(c_ptr) :: channel = c_null_ptr
    integer(c_size_t) :: count = 0
    type(c_ptr) :: mass = c_null_ptr
    type(c_ptr) :: momentum = c_null_ptr
    type(c_ptr) :: energy = c_null_ptr
    type(c_ptr) :: metals = c_null_ptr
    type(c_ptr) :: elements = c_null_ptr
    type(c_ptr) :: position = c_null_ptr
    type(c_ptr) :: particle_id = c_null_ptr
    integer(c_size_t) :: elements_each = 0
  end type c_tally_batch

  type, bind(c) :: c_standing
    integer(c_size_t) :: size = 0
    integer(c_int32_t) :: asleep = 0
    integer(c_int32_t) :: reserved = 0
    integer(c_int64_t) :: rows = 0
    integer(c_int64_t) :: rows_written = 0
    integer(c_int64_t) :: rows_lost = 0
    real(c_double) :: seconds = 0.0_c_double
  end type c_standing

  interface
    function c_limno_version() bind(c, name="limno_version") result(version)
      import :: c_int32_t
      integer(c_int32_t) :: version
    end function c_limno_version

    function c_limno_open(header_version, config, series, options, run) &
      bind(c, name="limno_open") result(answer)
      import :: c_char, c_int32_t, c_options, c_ptr
      integer(c_int32_t), value :: header_version
      character(kind=c_char), intent(in) :: config(*), series(*)
      type(c_options), intent(in) :: options
      type(c_ptr), intent(inout) :: run
      integer(c_int32_t) :: answer
    end function c_limno_open

    function c_limno_open_fortran(header_version, config, series, options, communicator, run) &
      bind(c, name="limno_open_fortran") result(answer)
      import :: c_char, c_int32_t, c_options, c_ptr
      integer(c_int32_t), value :: header_version
      character(kind=c_char), intent(in) :: config(*), series(*)
      type(c_options), intent(in) :: options
      integer(c_int32_t), value :: communicator
      type(c_ptr), intent(inout) :: run
      integer(c_int32_t) :: answer
    end function c_limno_open_fortran

    function c_limno_due(run, clock, due) bind(c, name="limno_due") result(answer)
      import :: c_clock, c_int32_t, c_ptr
      type(c_ptr), value :: run
      type(c_clock), intent(in) :: clock
      integer(c_int32_t), intent(inout) :: due
      integer(c_int32_t) :: answer
    end function c_limno_due

    function c_limno_mark(run, clock) bind(c, name="limno_mark") result(answer)
      import :: c_clock, c_int32_t, c_ptr
      type(c_ptr), value :: run
      type(c_clock), intent(in) :: clock
      integer(c_int32_t) :: answer
    end function c_limno_mark

    function c_limno_lend_array(run, species, field, array, count) &
      bind(c, name="limno_lend_array") result(answer)
      import :: c_array, c_char, c_int32_t, c_ptr, c_size_t
      type(c_ptr), value :: run
      character(kind=c_char), intent(in) :: species(*), field(*)
      type(c_array), intent(in) :: array
      integer(c_size_t), value :: count
      integer(c_int32_t) :: answer
    end function c_limno_lend_array

    function c_limno_tally(run, batch) bind(c, name="limno_tally") result(answer)
      import :: c_int32_t, c_ptr, c_tally_batch
      type(c_ptr), value :: run
      type(c_tally_batch), intent(in) :: batch
      integer(c_int32_t) :: answer
    end function c_limno_tally

    function c_limno_sound(run, species) bind(c, name="limno_sound") result(answer)
      import :: c_char, c_int32_t, c_ptr
      type(c_ptr), value :: run
      character(kind=c_char), intent(in) :: species(*)
      integer(c_int32_t) :: answer
    end function c_limno_sound

    function c_limno_enter(run) bind(c, name="limno_enter") result(answer)
      import :: c_int32_t, c_ptr
      type(c_ptr), value :: run
      integer(c_int32_t) :: answer
    end function c_limno_enter

    function c_limno_flush(run) bind(c, name="limno_flush") result(answer)
      import :: c_int32_t, c_ptr
      type(c_ptr), value :: run
      integer(c_int32_t) :: answer
    end function c_limno_flush

    function c_limno_close(run) bind(c, name="limno_close") result(answer)
      import :: c_int32_t, c_ptr
      type(c_ptr), value :: run
      integer(c_int32_t) :: answer
    end function c_limno_close

    function c_limno_last_error(run) bind(c, name="limno_last_error") result(text)
      import :: c_ptr
      type(c_ptr), value :: run
      type(c_ptr) :: text
    end function c_limno_last_error

    function c_limno_status_name(status) bind(c, name="limno_status_name") result(text)
      import :: c_int32_t, c_ptr
      integer(c_int32_t), value :: status
      type(c_ptr) :: text
    end function c_limno_status_name

    function c_limno_how_it_stands(run, standing) bind(c, name="limno_how_it_stands") result(answer)
      import :: c_int32_t, c_ptr, c_standing
      type(c_ptr), value :: run
      type(c_standing), intent(inout) :: standing
      integer(c_int32_t) :: answer
    end function c_limno_how_it_stands

    ! Of the C library: the length of a string.
    function c_strlen(text) bind(c, name="strlen") result(length)
      import :: c_ptr, c_size_t
      type(c_ptr), value :: text
      integer(c_size_t) :: length
    end function c_strlen
  end interface
end module limnograph_interface

! What a host uses.
module limnograph
  use, intrinsic :: iso_c_binding, only: c_char, c_f_pointer, c_int32_t, c_intptr_t, c_loc, &
    c_null_char, c_null_ptr, c_ptr, c_size_t, c_sizeof
  use, intrinsic :: iso_fortran_env, only: int32, int64, real32, real64
  use limnograph_interface
  implicit none
  private

  ! The version of this module, major * 10000 + minor * 100 + patch; a library of another version
  ! refuses to open.
  integer, parameter, public :: LIMNO_MODULE_VERSION = int(c_header_version)

  ! What every call answers; limnograph.h says what each means.
  integer, parameter, public :: LIMNO_OK = 0
  integer, parameter, public :: LIMNO_BAD_ARGUMENT = 1
  integer, parameter, public :: LIMNO_BAD_ORDER = 2
  integer, parameter, public :: LIMNO_BAD_CLOCK = 3
  integer, parameter, public :: LIMNO_UNKNOWN_NAME = 4
  integer, parameter, public :: LIMNO_BAD_CONFIG = 5
  integer, parameter, public :: LIMNO_BAD_VERSION = 6
  integer, parameter, public :: LIMNO_BAD_MPI = 7
  integer, parameter, public :: LIMNO_DISK = 8
  integer, parameter, public :: LIMNO_NOT_DURABLE = 9
  integer, parameter, public :: LIMNO_LEFT_OUT = 10
  integer, parameter, public :: LIMNO_ASLEEP = 11
  integer, parameter, public :: LIMNO_CLOSED = 12
  integer, parameter, public :: LIMNO_NO_MEMORY = 13
  integer, parameter, public :: LIMNO_INTERNAL = 14

  ! One opened instance.
  type, public :: limno_run
    private
    type(c_ptr) :: handle = c_null_ptr
    ! Why this module refused the last call that failed; not allocated when the library did.
    character(len=:), allocatable :: refusal
  end type limno_run

  ! What the host says about a step; limnograph.h explains the members.
  type, public :: limno_clock
    integer(int64) :: step = 0
    real(real64) :: time = 0.0_real64
    real(real64) :: step_length = 0.0_real64
    logical :: synchronised = .true.
    logical :: checkpoint = .false.
  end type limno_clock

  ! How a run stands; limnograph.h explains the members.
  type, public :: limno_standing
    logical :: asleep = .false.
    integer(int64) :: rows = 0
    integer(int64) :: rows_written = 0
    integer(int64) :: rows_lost = 0
    real(real64) :: seconds = 0.0_real64
  end type limno_standing

  ! Opens a run: of a process alone, or (collective) over the processes of a communicator.
  !     limno_open(config, series, run)
  !     limno_open(config, series, communicator, run)
  ! By keyword: host_name, host_version, description, config_text, threads, status.
  interface limno_open
    module procedure open_alone, open_communicator
  end interface limno_open

  ! Lends reals or integers of 32 or 64 bits: pointers to arrays or sections, or whole allocatable
  ! arrays; of rank 1, or of rank 2 with the numbers of an element in the first dimension, or in the
  ! last one if so said; or three of rank 1.
  !     limno_lend(run, species, field, array, status)
  !     limno_lend(run, species, field, array, status, components_last)
  !     limno_lend(run, species, field, x, y, z, status)
  interface limno_lend
    module procedure lend_real32, lend_real64, lend_int32, lend_int64
    module procedure lend_matrix_real32, lend_matrix_real64
    module procedure lend_matrix_int32, lend_matrix_int64
    module procedure lend_xyz_real32, lend_xyz_real64, lend_xyz_int32, lend_xyz_int64
    module procedure lend_own_real32, lend_own_real64, lend_own_int32, lend_own_int64
    module procedure lend_own_matrix_real32, lend_own_matrix_real64
    module procedure lend_own_matrix_int32, lend_own_matrix_int64
    module procedure lend_own_xyz_real32, lend_own_xyz_real64
    module procedure lend_own_xyz_int32, lend_own_xyz_int64
  end interface limno_lend

  ! Lends one value that all `count` elements share. `value` is a variable with the attribute
  ! `target`; it is read when the species is sounded or the step entered. `count` has 32 or 64 bits.
  !     limno_lend_constant(run, species, field, value, count, status)
  interface limno_lend_constant
    module procedure lend_constant_real32, lend_constant_real32_long
    module procedure lend_constant_real64, lend_constant_real64_long
  end interface limno_lend_constant

  public :: limno_open, limno_due, limno_mark, limno_lend, limno_lend_constant, limno_tally
  public :: limno_sound, limno_enter, limno_flush, limno_close
  public :: limno_last_error, limno_status_name, limno_version, limno_how_it_stands

  ! Where an array stands in memory: the address of its first number, and for each dimension how
  ! many numbers there are and how many bytes lie from one to the next (0 when there is no next).
  type :: placement
    logical :: there = .false.
    integer(c_int32_t) :: scalar = 0
    integer(c_intptr_t) :: first = 0
    integer(int64) :: extent(2) = [1_int64, 0_int64]
    integer(c_intptr_t) :: stride(2) = 0
  end type placement

  character(len=*), parameter :: nothing_there = "the array is not allocated, or the pointer "// &
    "not associated; a rank without elements lends an array of size 0"

  interface placement_of
    module procedure placement_real32, placement_real64, placement_int32, placement_int64
    module procedure placement_matrix_real32, placement_matrix_real64
    module procedure placement_matrix_int32, placement_matrix_int64
  end interface placement_of

contains

  ! ---- Opening and closing -----------------------------------------------------------------------

  subroutine open_alone(config, series, run, host_name, host_version, description, config_text, &
                        threads, status)
    character(len=*), intent(in) :: config, series
    type(limno_run), intent(out) :: run
    character(len=*), intent(in), optional :: host_name, host_version, description, config_text
    integer, intent(in), optional :: threads
    integer, intent(out), optional :: status
    call open_run(config, series, run, host_name=host_name, host_version=host_version, &
                  description=description, config_text=config_text, threads=threads, status=status)
  end subroutine open_alone

  subroutine open_communicator(config, series, communicator, run, host_name, host_version, &
                               description, config_text, threads, status)
    character(len=*), intent(in) :: config, series
    integer, intent(in) :: communicator
    type(limno_run), intent(out) :: run
    character(len=*), intent(in), optional :: host_name, host_version, description, config_text
    integer, intent(in), optional :: threads
    integer, intent(out), optional :: status
    call open_run(config, series, run, communicator, host_name, host_version, description, &
                  config_text, threads, status)
  end subroutine open_communicator

  subroutine open_run(config, series, run, communicator, host_name, host_version, description, &
                      config_text, threads, status)
    character(len=*), intent(in) :: config, series
    type(limno_run), intent(inout) :: run
    integer, intent(in), optional :: communicator
    character(len=*), intent(in), optional :: host_name, host_version, description, config_text
    integer, intent(in), optional :: threads
    integer, intent(out), optional :: status
    character(kind=c_char), allocatable, target :: name(:), version(:), about(:), text(:)
    type(c_options) :: options
    integer(c_int32_t) :: answer

    options%size = c_sizeof(options)
    if (present(host_name)) then
      call spell(host_name, name)
      options%host_name = c_loc(name)
    end if
    if (present(host_version)) then
      call spell(host_version, version)
      options%host_version = c_loc(version)
    end if
    if (present(description)) then
      call spell(description, about)
      options%description = c_loc(about)
    end if
    if (present(config_text)) then
      call spell(config_text, text)
      options%config_text = c_loc(text)
    end if
    if (present(threads)) options%threads = int(threads, c_int32_t)

    if (present(communicator)) then
      answer = c_limno_open_fortran(c_header_version, trim(config)//c_null_char, &
                                    trim(series)//c_null_char, options, &
                                    int(communicator, c_int32_t), run%handle)
    else
      answer = c_limno_open(c_header_version, trim(config)//c_null_char, &
                            trim(series)//c_null_char, options, run%handle)
    end if
    call conclude(run, answer, status)
  end subroutine open_run

  ! Completes all rows, writes them, and ends the run. Collective.
  subroutine limno_close(run, status)
    type(limno_run), intent(inout) :: run
    integer, intent(out), optional :: status
    call conclude(run, c_limno_close(run%handle), status)
  end subroutine limno_close

  ! ---- The steps ---------------------------------------------------------------------------------

  ! Would a step with this clock be measured? .false. also when there is no answer.
  subroutine limno_due(run, clock, due, status)
    type(limno_run), intent(inout) :: run
    type(limno_clock), intent(in) :: clock
    logical, intent(out) :: due
    integer, intent(out), optional :: status
    integer(c_int32_t) :: answer, measured
    measured = 0
    answer = c_limno_due(run%handle, clock_for_c(clock), measured)
    due = answer == LIMNO_OK .and. measured /= 0
    call conclude(run, answer, status)
  end subroutine limno_due

  ! A step begins: here is its clock.
  subroutine limno_mark(run, clock, status)
    type(limno_run), intent(inout) :: run
    type(limno_clock), intent(in) :: clock
    integer, intent(out), optional :: status
    call conclude(run, c_limno_mark(run%handle, clock_for_c(clock)), status)
  end subroutine limno_mark

  ! Measures now what has been lent of a species, and lets go of its arrays.
  subroutine limno_sound(run, species, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species
    integer, intent(out), optional :: status
    call conclude(run, c_limno_sound(run%handle, trim(species)//c_null_char), status)
  end subroutine limno_sound

  ! The step is over: reduces, and enters its row in the log. Collective on steps that are due.
  subroutine limno_enter(run, status)
    type(limno_run), intent(inout) :: run
    integer, intent(out), optional :: status
    call conclude(run, c_limno_enter(run%handle), status)
  end subroutine limno_enter

  ! Completes the rows of all steps entered so far and hands them to the writer. Collective.
  subroutine limno_flush(run, status)
    type(limno_run), intent(inout) :: run
    integer, intent(out), optional :: status
    call conclude(run, c_limno_flush(run%handle), status)
  end subroutine limno_flush

  ! Posts a batch of events on a channel: each array has one entry an event, `position` is (3,
  ! events) and `elements` (elements named in the config, events). What is not known is left out;
  ! `count` is only needed when all arrays are. The arrays are read at once, so that expressions
  ! will do here.
  subroutine limno_tally(run, channel, mass, momentum, energy, metals, elements, position, &
                         particle_id, count, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: channel
    real(real64), intent(in), optional, contiguous, target :: mass(:), momentum(:), energy(:)
    real(real64), intent(in), optional, contiguous, target :: metals(:), elements(:, :)
    real(real64), intent(in), optional, contiguous, target :: position(:, :)
    integer(int64), intent(in), optional, contiguous, target :: particle_id(:)
    integer, intent(in), optional :: count
    integer, intent(out), optional :: status
    character(kind=c_char), allocatable, target :: name(:)
    character(len=:), allocatable :: problem
    type(c_tally_batch) :: batch
    integer(int64) :: events

    call spell(channel, name)
    batch%size = c_sizeof(batch)
    batch%channel = c_loc(name)
    events = -1
    if (present(count)) call agree("count", int(count, int64))
    if (present(mass)) call agree("mass", size(mass, kind=int64))
    if (present(momentum)) call agree("momentum", size(momentum, kind=int64))
    if (present(energy)) call agree("energy", size(energy, kind=int64))
    if (present(metals)) call agree("metals", size(metals, kind=int64))
    if (present(elements)) call agree("elements", size(elements, 2, kind=int64))
    if (present(position)) call agree("position", size(position, 2, kind=int64))
    if (present(particle_id)) call agree("particle_id", size(particle_id, kind=int64))
    if (present(position)) then
      if (size(position, 1) /= 3) problem = "position is to be an array (3, events)"
    end if
    if (events < 0 .and. .not. allocated(problem)) problem = "give at least one array, or a "// &
      "count of events that is not negative"
    if (allocated(problem)) then
      ! A batch of no known size: the library answers as it must in the state the run is in.
      batch%size = 0
      call conclude(run, c_limno_tally(run%handle, batch), status, "tally: "//problem)
      return
    end if

    batch%count = int(events, c_size_t)
    if (events > 0) then
      if (present(mass)) batch%mass = c_loc(mass)
      if (present(momentum)) batch%momentum = c_loc(momentum)
      if (present(energy)) batch%energy = c_loc(energy)
      if (present(metals)) batch%metals = c_loc(metals)
      if (present(position)) batch%position = c_loc(position)
      if (present(particle_id)) batch%particle_id = c_loc(particle_id)
      if (present(elements)) then
        if (size(elements) > 0) batch%elements = c_loc(elements)
        batch%elements_each = size(elements, 1, kind=c_size_t)
      end if
    end if
    call conclude(run, c_limno_tally(run%handle, batch), status)

  contains

    subroutine agree(what, number)
      character(len=*), intent(in) :: what
      integer(int64), intent(in) :: number
      if (events < 0) events = number
      if (number /= events) problem = what//" is for "//decimal(number)//" events, what stands "// &
        "before it for "//decimal(events)//"; give one entry an event in every array"
    end subroutine agree
  end subroutine limno_tally

  ! ---- What the host may ask ---------------------------------------------------------------------

  ! The text of the last error of a run; of this thread when the run was never opened or is closed.
  function limno_last_error(run) result(text)
    type(limno_run), intent(in) :: run
    character(len=:), allocatable :: text
    if (allocated(run%refusal)) then
      text = run%refusal
    else
      text = fortran_text(c_limno_last_error(run%handle))
    end if
  end function limno_last_error

  ! The name of a status, e.g. "LIMNO_BAD_CLOCK".
  function limno_status_name(status) result(text)
    integer, intent(in) :: status
    character(len=:), allocatable :: text
    text = fortran_text(c_limno_status_name(int(status, c_int32_t)))
  end function limno_status_name

  ! The version of the library, in the same form as LIMNO_MODULE_VERSION.
  function limno_version() result(version)
    integer :: version
    version = int(c_limno_version())
  end function limno_version

  ! Rows, whether they are written, whether the run sleeps. Not collective.
  subroutine limno_how_it_stands(run, standing, status)
    type(limno_run), intent(inout) :: run
    type(limno_standing), intent(out) :: standing
    integer, intent(out), optional :: status
    type(c_standing) :: found
    integer(c_int32_t) :: answer
    found%size = c_sizeof(found)
    answer = c_limno_how_it_stands(run%handle, found)
    standing = limno_standing(found%asleep /= 0, found%rows, found%rows_written, found%rows_lost, &
                              found%seconds)
    call conclude(run, answer, status)
  end subroutine limno_how_it_stands

  ! ---- Lending -----------------------------------------------------------------------------------
  !
  ! Only pointers and whole allocatable arrays can be lent, because nothing else is handed over
  ! where it stands by every compiler. gfortran 12 for one makes a copy of gas%mass for an
  ! assumed-shape argument, and passes the address of another member for a pointer that is
  ! intent(in). A pointer assignment it does right, and it says clearly what cannot be pointed at.

  ! One value for all.
  subroutine lend_constant(run, species, field, scalar, place, count, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    integer(c_int32_t), intent(in) :: scalar
    type(c_ptr), intent(in) :: place
    integer(int64), intent(in) :: count
    integer, intent(out), optional :: status
    type(c_array) :: array
    if (count < 0) then
      call refuse(run, species, field, "the count is negative, "//decimal(count), status)
      return
    end if
    array%size = c_sizeof(array)
    array%scalar = scalar
    array%data = place
    call deliver(run, species, field, array, count, status)
  end subroutine lend_constant

  ! An array of rank 1 (components_last not given) or 2.
  subroutine lend_placed(run, species, field, lent, components_last, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    type(placement), intent(in) :: lent
    logical, intent(in), optional :: components_last
    integer, intent(out), optional :: status
    type(c_array) :: array
    type(c_ptr), allocatable, target :: components(:)
    integer(int64) :: component, many
    integer :: across, along

    if (.not. lent%there) then
      call refuse(run, species, field, nothing_there, status)
      return
    end if
    across = 1
    if (present(components_last)) across = merge(2, 1, components_last)
    along = 3 - across
    many = lent%extent(across)
    if (all(lent%extent == 0) .and. is_vector(field)) many = 3
    if (is_vector(field) .and. many /= 3 .and. lent%extent(1) /= 1) then
      call refuse(run, species, field, "an array of shape ("//decimal(lent%extent(1))//", "// &
                  decimal(lent%extent(2))//") has no 3 components where they are expected; "// &
                  "lend an array (3, n), or (n, 3) with components_last = .true.", status)
      return
    end if

    array%size = c_sizeof(array)
    array%scalar = lent%scalar
    array%components = int(min(many, int(huge(array%components), int64)), c_int32_t)
    array%stride = lent%stride(along)
    if (lent%extent(along) < 2) array%stride = bytes(lent%scalar)*max(1_c_int32_t, array%components)
    if (lent%extent(along) > 0) array%data = pointer_to(lent%first)
    if (many > 1 .and. lent%extent(along) > 0 .and. lent%stride(across) /= bytes(lent%scalar)) then
      allocate (components(many))
      do component = 1, many
        components(component) = pointer_to(lent%first + (component - 1)*lent%stride(across))
      end do
      array%arrays = c_loc(components)
    end if
    call deliver(run, species, field, array, lent%extent(along), status)
  end subroutine lend_placed

  ! Three arrays of rank 1 of the same type.
  subroutine lend_three(run, species, field, x, y, z, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    type(placement), intent(in) :: x, y, z
    integer, intent(out), optional :: status
    type(c_array) :: array
    type(c_ptr), target :: components(3)

    if (.not. (x%there .and. y%there .and. z%there)) then
      call refuse(run, species, field, nothing_there, status)
    else if (x%extent(2) /= y%extent(2) .or. x%extent(2) /= z%extent(2)) then
      call refuse(run, species, field, "x, y and z have "//decimal(x%extent(2))//", "// &
                  decimal(y%extent(2))//" and "//decimal(z%extent(2))//" elements; they must "// &
                  "have the same number", status)
    else if (x%stride(2) /= y%stride(2) .or. x%stride(2) /= z%stride(2)) then
      call refuse(run, species, field, "the elements of x, y and z must lie equally far apart, "// &
                  "not "//decimal(int(x%stride(2), int64))//", "// &
                  decimal(int(y%stride(2), int64))//" and "// &
                  decimal(int(z%stride(2), int64))//" bytes", status)
    else
      array%size = c_sizeof(array)
      array%scalar = x%scalar
      array%components = 3
      array%stride = merge(x%stride(2), bytes(x%scalar), x%extent(2) > 1)
      components = [pointer_to(x%first), pointer_to(y%first), pointer_to(z%first)]
      array%arrays = c_loc(components)
      call deliver(run, species, field, array, x%extent(2), status)
    end if
  end subroutine lend_three

  subroutine deliver(run, species, field, array, count, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    type(c_array), intent(in) :: array
    integer(int64), intent(in) :: count
    integer, intent(out), optional :: status
    integer(c_int32_t) :: answer
    answer = c_limno_lend_array(run%handle, trim(species)//c_null_char, trim(field)//c_null_char, &
                                array, int(count, c_size_t))
    call conclude(run, answer, status)
  end subroutine deliver

  ! Refuses an array. The library hears of it as well, in the form of an array without a size: it
  ! must know that this species will be incomplete on this rank, and answer as it must in the
  ! run's state.
  subroutine refuse(run, species, field, reason, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field, reason
    integer, intent(out), optional :: status
    type(c_array) :: array
    integer(c_int32_t) :: answer
    answer = c_limno_lend_array(run%handle, trim(species)//c_null_char, trim(field)//c_null_char, &
                                array, 0_c_size_t)
    call conclude(run, answer, status, trim(species)//" "//trim(field)//": "//reason)
  end subroutine refuse

  ! ---- Small things ------------------------------------------------------------------------------

  ! Hands the answer on. With a refusal, the call is wrong even if the library found it harmless.
  subroutine conclude(run, answer, status, refusal)
    type(limno_run), intent(inout) :: run
    integer(c_int32_t), intent(in) :: answer
    integer, intent(out), optional :: status
    character(len=*), intent(in), optional :: refusal
    integer :: final
    final = int(answer)
    if (present(refusal) .and. final == LIMNO_OK) final = LIMNO_BAD_ARGUMENT
    if (present(status)) status = final
    if (final == LIMNO_OK) return
    if (allocated(run%refusal)) deallocate (run%refusal)
    if (present(refusal) .and. final == LIMNO_BAD_ARGUMENT) run%refusal = refusal
  end subroutine conclude

  function clock_for_c(clock) result(for_c)
    type(limno_clock), intent(in) :: clock
    type(c_clock) :: for_c
    for_c = c_clock(c_sizeof(for_c), clock%step, clock%time, clock%step_length, &
                    merge(1_c_int32_t, 0_c_int32_t, clock%synchronised), &
                    merge(1_c_int32_t, 0_c_int32_t, clock%checkpoint))
  end function clock_for_c

  pure function is_vector(field) result(yes)
    character(len=*), intent(in) :: field
    logical :: yes
    yes = field == "position" .or. field == "velocity"
  end function is_vector

  pure function bytes(scalar) result(number)
    integer(c_int32_t), intent(in) :: scalar
    integer(c_intptr_t) :: number
    number = merge(4, 8, scalar == c_f32 .or. scalar == c_i32)
  end function bytes

  pure function address(place) result(number)
    type(c_ptr), intent(in) :: place
    integer(c_intptr_t) :: number
    number = transfer(place, number)
  end function address

  pure function pointer_to(number) result(place)
    integer(c_intptr_t), intent(in) :: number
    type(c_ptr) :: place
    place = transfer(number, place)
  end function pointer_to

  ! Text without trailing blanks, as C has it.
  subroutine spell(text, for_c)
    character(len=*), intent(in) :: text
    character(kind=c_char), allocatable, intent(out) :: for_c(:)
    integer :: at
    allocate (for_c(len_trim(text) + 1))
    do at = 1, len_trim(text)
      for_c(at) = text(at:at)
    end do
    for_c(len_trim(text) + 1) = c_null_char
  end subroutine spell

  function fortran_text(from_c) result(text)
    type(c_ptr), intent(in) :: from_c
    character(len=:), allocatable :: text
    character(kind=c_char), pointer :: letters(:)
    integer :: at, length
    length = int(c_strlen(from_c))
    call c_f_pointer(from_c, letters, [length])
    allocate (character(len=length) :: text)
    do at = 1, length
      text(at:at) = letters(at)
    end do
  end function fortran_text

  pure function decimal(number) result(text)
    integer(int64), intent(in) :: number
    character(len=:), allocatable :: text
    character(len=20) :: buffer
    write (buffer, "(i0)") number
    text = trim(buffer)
  end function decimal

  ! ---- Where arrays stand ------------------------------------------------------------------------
  !
  ! A pointer keeps the lower bounds of the array that it points to.

  function placement_real32(array) result(lent)
    real(real32), pointer, intent(in) :: array(:)
    type(placement) :: lent
    integer(int64) :: one
    lent = placement(there=associated(array), scalar=c_f32)
    if (.not. lent%there) return
    one = lbound(array, 1, int64)
    lent%extent(2) = size(array, kind=int64)
    if (lent%extent(2) > 0) lent%first = address(c_loc(array(one)))
    if (lent%extent(2) > 1) lent%stride(2) = address(c_loc(array(one + 1))) - lent%first
  end function placement_real32

  function placement_real64(array) result(lent)
    real(real64), pointer, intent(in) :: array(:)
    type(placement) :: lent
    integer(int64) :: one
    lent = placement(there=associated(array), scalar=c_f64)
    if (.not. lent%there) return
    one = lbound(array, 1, int64)
    lent%extent(2) = size(array, kind=int64)
    if (lent%extent(2) > 0) lent%first = address(c_loc(array(one)))
    if (lent%extent(2) > 1) lent%stride(2) = address(c_loc(array(one + 1))) - lent%first
  end function placement_real64

  function placement_int32(array) result(lent)
    integer(int32), pointer, intent(in) :: array(:)
    type(placement) :: lent
    integer(int64) :: one
    lent = placement(there=associated(array), scalar=c_i32)
    if (.not. lent%there) return
    one = lbound(array, 1, int64)
    lent%extent(2) = size(array, kind=int64)
    if (lent%extent(2) > 0) lent%first = address(c_loc(array(one)))
    if (lent%extent(2) > 1) lent%stride(2) = address(c_loc(array(one + 1))) - lent%first
  end function placement_int32

  function placement_int64(array) result(lent)
    integer(int64), pointer, intent(in) :: array(:)
    type(placement) :: lent
    integer(int64) :: one
    lent = placement(there=associated(array), scalar=c_i64)
    if (.not. lent%there) return
    one = lbound(array, 1, int64)
    lent%extent(2) = size(array, kind=int64)
    if (lent%extent(2) > 0) lent%first = address(c_loc(array(one)))
    if (lent%extent(2) > 1) lent%stride(2) = address(c_loc(array(one + 1))) - lent%first
  end function placement_int64

  function placement_matrix_real32(array) result(lent)
    real(real32), pointer, intent(in) :: array(:, :)
    type(placement) :: lent
    integer(int64) :: one(2)
    lent = placement(there=associated(array), scalar=c_f32)
    if (.not. lent%there) return
    one = lbound(array, kind=int64)
    lent%extent = shape(array, kind=int64)
    if (any(lent%extent == 0)) return
    lent%first = address(c_loc(array(one(1), one(2))))
    if (lent%extent(1) > 1) lent%stride(1) = address(c_loc(array(one(1) + 1, one(2)))) - lent%first
    if (lent%extent(2) > 1) lent%stride(2) = address(c_loc(array(one(1), one(2) + 1))) - lent%first
  end function placement_matrix_real32

  function placement_matrix_real64(array) result(lent)
    real(real64), pointer, intent(in) :: array(:, :)
    type(placement) :: lent
    integer(int64) :: one(2)
    lent = placement(there=associated(array), scalar=c_f64)
    if (.not. lent%there) return
    one = lbound(array, kind=int64)
    lent%extent = shape(array, kind=int64)
    if (any(lent%extent == 0)) return
    lent%first = address(c_loc(array(one(1), one(2))))
    if (lent%extent(1) > 1) lent%stride(1) = address(c_loc(array(one(1) + 1, one(2)))) - lent%first
    if (lent%extent(2) > 1) lent%stride(2) = address(c_loc(array(one(1), one(2) + 1))) - lent%first
  end function placement_matrix_real64

  function placement_matrix_int32(array) result(lent)
    integer(int32), pointer, intent(in) :: array(:, :)
    type(placement) :: lent
    integer(int64) :: one(2)
    lent = placement(there=associated(array), scalar=c_i32)
    if (.not. lent%there) return
    one = lbound(array, kind=int64)
    lent%extent = shape(array, kind=int64)
    if (any(lent%extent == 0)) return
    lent%first = address(c_loc(array(one(1), one(2))))
    if (lent%extent(1) > 1) lent%stride(1) = address(c_loc(array(one(1) + 1, one(2)))) - lent%first
    if (lent%extent(2) > 1) lent%stride(2) = address(c_loc(array(one(1), one(2) + 1))) - lent%first
  end function placement_matrix_int32

  function placement_matrix_int64(array) result(lent)
    integer(int64), pointer, intent(in) :: array(:, :)
    type(placement) :: lent
    integer(int64) :: one(2)
    lent = placement(there=associated(array), scalar=c_i64)
    if (.not. lent%there) return
    one = lbound(array, kind=int64)
    lent%extent = shape(array, kind=int64)
    if (any(lent%extent == 0)) return
    lent%first = address(c_loc(array(one(1), one(2))))
    if (lent%extent(1) > 1) lent%stride(1) = address(c_loc(array(one(1) + 1, one(2)))) - lent%first
    if (lent%extent(2) > 1) lent%stride(2) = address(c_loc(array(one(1), one(2) + 1))) - lent%first
  end function placement_matrix_int64

  ! ---- Lending, type by type: constants ----------------------------------------------------------

  subroutine lend_constant_real32(run, species, field, value, count, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    real(real32), pointer, intent(in) :: value
    integer(int32), intent(in) :: count
    integer, intent(out), optional :: status
    if (associated(value)) then
      call lend_constant(run, species, field, c_f32, c_loc(value), int(count, int64), status)
    else
      call refuse(run, species, field, nothing_there, status)
    end if
  end subroutine lend_constant_real32

  subroutine lend_constant_real32_long(run, species, field, value, count, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    real(real32), pointer, intent(in) :: value
    integer(int64), intent(in) :: count
    integer, intent(out), optional :: status
    if (associated(value)) then
      call lend_constant(run, species, field, c_f32, c_loc(value), count, status)
    else
      call refuse(run, species, field, nothing_there, status)
    end if
  end subroutine lend_constant_real32_long

  subroutine lend_constant_real64(run, species, field, value, count, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    real(real64), pointer, intent(in) :: value
    integer(int32), intent(in) :: count
    integer, intent(out), optional :: status
    if (associated(value)) then
      call lend_constant(run, species, field, c_f64, c_loc(value), int(count, int64), status)
    else
      call refuse(run, species, field, nothing_there, status)
    end if
  end subroutine lend_constant_real64

  subroutine lend_constant_real64_long(run, species, field, value, count, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    real(real64), pointer, intent(in) :: value
    integer(int64), intent(in) :: count
    integer, intent(out), optional :: status
    if (associated(value)) then
      call lend_constant(run, species, field, c_f64, c_loc(value), count, status)
    else
      call refuse(run, species, field, nothing_there, status)
    end if
  end subroutine lend_constant_real64_long

  ! ---- Lending, type by type: arrays -------------------------------------------------------------

  subroutine lend_real32(run, species, field, array, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    real(real32), pointer :: array(:)
    integer, intent(out), optional :: status
    call lend_placed(run, species, field, placement_of(array), status=status)
  end subroutine lend_real32

  subroutine lend_real64(run, species, field, array, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    real(real64), pointer :: array(:)
    integer, intent(out), optional :: status
    call lend_placed(run, species, field, placement_of(array), status=status)
  end subroutine lend_real64

  subroutine lend_int32(run, species, field, array, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    integer(int32), pointer :: array(:)
    integer, intent(out), optional :: status
    call lend_placed(run, species, field, placement_of(array), status=status)
  end subroutine lend_int32

  subroutine lend_int64(run, species, field, array, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    integer(int64), pointer :: array(:)
    integer, intent(out), optional :: status
    call lend_placed(run, species, field, placement_of(array), status=status)
  end subroutine lend_int64

  subroutine lend_matrix_real32(run, species, field, array, status, components_last)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    real(real32), pointer :: array(:, :)
    integer, intent(out), optional :: status
    logical, intent(in), optional :: components_last
    call lend_placed(run, species, field, placement_of(array), components_last, status)
  end subroutine lend_matrix_real32

  subroutine lend_matrix_real64(run, species, field, array, status, components_last)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    real(real64), pointer :: array(:, :)
    integer, intent(out), optional :: status
    logical, intent(in), optional :: components_last
    call lend_placed(run, species, field, placement_of(array), components_last, status)
  end subroutine lend_matrix_real64

  subroutine lend_matrix_int32(run, species, field, array, status, components_last)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    integer(int32), pointer :: array(:, :)
    integer, intent(out), optional :: status
    logical, intent(in), optional :: components_last
    call lend_placed(run, species, field, placement_of(array), components_last, status)
  end subroutine lend_matrix_int32

  subroutine lend_matrix_int64(run, species, field, array, status, components_last)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    integer(int64), pointer :: array(:, :)
    integer, intent(out), optional :: status
    logical, intent(in), optional :: components_last
    call lend_placed(run, species, field, placement_of(array), components_last, status)
  end subroutine lend_matrix_int64

  subroutine lend_xyz_real32(run, species, field, x, y, z, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    real(real32), pointer :: x(:), y(:), z(:)
    integer, intent(out), optional :: status
    call lend_three(run, species, field, placement_of(x), placement_of(y), placement_of(z), status)
  end subroutine lend_xyz_real32

  subroutine lend_xyz_real64(run, species, field, x, y, z, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    real(real64), pointer :: x(:), y(:), z(:)
    integer, intent(out), optional :: status
    call lend_three(run, species, field, placement_of(x), placement_of(y), placement_of(z), status)
  end subroutine lend_xyz_real64

  subroutine lend_xyz_int32(run, species, field, x, y, z, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    integer(int32), pointer :: x(:), y(:), z(:)
    integer, intent(out), optional :: status
    call lend_three(run, species, field, placement_of(x), placement_of(y), placement_of(z), status)
  end subroutine lend_xyz_int32

  subroutine lend_xyz_int64(run, species, field, x, y, z, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    integer(int64), pointer :: x(:), y(:), z(:)
    integer, intent(out), optional :: status
    call lend_three(run, species, field, placement_of(x), placement_of(y), placement_of(z), status)
  end subroutine lend_xyz_int64

  subroutine lend_own_real32(run, species, field, array, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    real(real32), allocatable, target, intent(in) :: array(:)
    integer, intent(out), optional :: status
    type(placement) :: lent
    if (allocated(array)) lent = placement_of(array)
    call lend_placed(run, species, field, lent, status=status)
  end subroutine lend_own_real32

  subroutine lend_own_real64(run, species, field, array, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    real(real64), allocatable, target, intent(in) :: array(:)
    integer, intent(out), optional :: status
    type(placement) :: lent
    if (allocated(array)) lent = placement_of(array)
    call lend_placed(run, species, field, lent, status=status)
  end subroutine lend_own_real64

  subroutine lend_own_int32(run, species, field, array, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    integer(int32), allocatable, target, intent(in) :: array(:)
    integer, intent(out), optional :: status
    type(placement) :: lent
    if (allocated(array)) lent = placement_of(array)
    call lend_placed(run, species, field, lent, status=status)
  end subroutine lend_own_int32

  subroutine lend_own_int64(run, species, field, array, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    integer(int64), allocatable, target, intent(in) :: array(:)
    integer, intent(out), optional :: status
    type(placement) :: lent
    if (allocated(array)) lent = placement_of(array)
    call lend_placed(run, species, field, lent, status=status)
  end subroutine lend_own_int64

  subroutine lend_own_matrix_real32(run, species, field, array, status, components_last)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    real(real32), allocatable, target, intent(in) :: array(:, :)
    integer, intent(out), optional :: status
    logical, intent(in), optional :: components_last
    type(placement) :: lent
    if (allocated(array)) lent = placement_of(array)
    call lend_placed(run, species, field, lent, components_last, status)
  end subroutine lend_own_matrix_real32

  subroutine lend_own_matrix_real64(run, species, field, array, status, components_last)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    real(real64), allocatable, target, intent(in) :: array(:, :)
    integer, intent(out), optional :: status
    logical, intent(in), optional :: components_last
    type(placement) :: lent
    if (allocated(array)) lent = placement_of(array)
    call lend_placed(run, species, field, lent, components_last, status)
  end subroutine lend_own_matrix_real64

  subroutine lend_own_matrix_int32(run, species, field, array, status, components_last)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    integer(int32), allocatable, target, intent(in) :: array(:, :)
    integer, intent(out), optional :: status
    logical, intent(in), optional :: components_last
    type(placement) :: lent
    if (allocated(array)) lent = placement_of(array)
    call lend_placed(run, species, field, lent, components_last, status)
  end subroutine lend_own_matrix_int32

  subroutine lend_own_matrix_int64(run, species, field, array, status, components_last)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    integer(int64), allocatable, target, intent(in) :: array(:, :)
    integer, intent(out), optional :: status
    logical, intent(in), optional :: components_last
    type(placement) :: lent
    if (allocated(array)) lent = placement_of(array)
    call lend_placed(run, species, field, lent, components_last, status)
  end subroutine lend_own_matrix_int64

  subroutine lend_own_xyz_real32(run, species, field, x, y, z, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    real(real32), allocatable, target, intent(in) :: x(:), y(:), z(:)
    integer, intent(out), optional :: status
    type(placement) :: lent(3)
    if (allocated(x)) lent(1) = placement_of(x)
    if (allocated(y)) lent(2) = placement_of(y)
    if (allocated(z)) lent(3) = placement_of(z)
    call lend_three(run, species, field, lent(1), lent(2), lent(3), status)
  end subroutine lend_own_xyz_real32

  subroutine lend_own_xyz_real64(run, species, field, x, y, z, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    real(real64), allocatable, target, intent(in) :: x(:), y(:), z(:)
    integer, intent(out), optional :: status
    type(placement) :: lent(3)
    if (allocated(x)) lent(1) = placement_of(x)
    if (allocated(y)) lent(2) = placement_of(y)
    if (allocated(z)) lent(3) = placement_of(z)
    call lend_three(run, species, field, lent(1), lent(2), lent(3), status)
  end subroutine lend_own_xyz_real64

  subroutine lend_own_xyz_int32(run, species, field, x, y, z, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    integer(int32), allocatable, target, intent(in) :: x(:), y(:), z(:)
    integer, intent(out), optional :: status
    type(placement) :: lent(3)
    if (allocated(x)) lent(1) = placement_of(x)
    if (allocated(y)) lent(2) = placement_of(y)
    if (allocated(z)) lent(3) = placement_of(z)
    call lend_three(run, species, field, lent(1), lent(2), lent(3), status)
  end subroutine lend_own_xyz_int32

  subroutine lend_own_xyz_int64(run, species, field, x, y, z, status)
    type(limno_run), intent(inout) :: run
    character(len=*), intent(in) :: species, field
    integer(int64), allocatable, target, intent(in) :: x(:), y(:), z(:)
    integer, intent(out), optional :: status
    type(placement) :: lent(3)
    if (allocated(x)) lent(1) = placement_of(x)
    if (allocated(y)) lent(2) = placement_of(y)
    if (allocated(z)) lent(3) = placement_of(z)
    call lend_three(run, species, field, lent(1), lent(2), lent(3), status)
  end subroutine lend_own_xyz_int64
end module limnograph
