! Whatever a host does wrong is answered with a status and a text that says what; the run goes on,
! and nothing is printed or stopped, also when the host does not ask for the status.
include "support/checks.f90"

program errors_are_statuses
  use, intrinsic :: ieee_arithmetic, only: ieee_quiet_nan, ieee_value
  use checks
  implicit none

  type(limno_run) :: run, never_opened
  type(limno_standing) :: standing
  real(real64), allocatable, target :: mass(:), shorter(:), unallocated(:), vector(:, :)
  real(real64), pointer :: nowhere(:), x(:), y(:), z(:), no_value
  real(real64), target :: value
  real(real64) :: not_a_number
  logical :: due
  integer :: status

  allocate (mass(8), shorter(5), vector(3, 8))
  mass = 1.0_real64
  shorter = 1.0_real64
  vector = 1.0_real64
  value = 1.0_real64
  nullify (nowhere, no_value)
  not_a_number = ieee_value(not_a_number, ieee_quiet_nan)

  call limno_open("not_there.toml", place("errors_are_statuses.limno"), run, status=status)
  call expect_status(run, status, LIMNO_BAD_CONFIG, "a config that is not there", "not_there.toml")
  call limno_open("wrong.toml", place("errors_are_statuses.limno"), run, status=status, &
                  config_text=plain_config//"[cadense]"//newline)
  call expect_status(run, status, LIMNO_BAD_CONFIG, "a section that does not exist", "cadence")
  call limno_open("inline", place("not/there/either/x.limno"), run, status=status, &
                  config_text=plain_config)
  call expect_status(run, status, LIMNO_DISK, "a series in no directory", "x.limno")
  call limno_enter(never_opened, status)
  call expect_status(run, status, LIMNO_CLOSED, "a run that was never opened")
  call limno_how_it_stands(never_opened, standing, status)
  call expect_status(run, status, LIMNO_CLOSED, "asking how a run stands that was never opened")

  call open_plain("errors_are_statuses", run)
  call limno_lend(run, "gas", "mass", mass, status)
  call expect_status(run, status, LIMNO_BAD_ORDER, "lending before a step is marked", "limno_mark")
  call limno_enter(run, status)
  call expect_status(run, status, LIMNO_BAD_ORDER, "entering before a step is marked", "limno_mark")
  call limno_mark(run, limno_clock(step=1, time=not_a_number), status)
  call expect_status(run, status, LIMNO_BAD_CLOCK, "a time that is not a number", "finite")
  call limno_enter(run)
  call limno_due(run, limno_clock(step=2, time=not_a_number), due, status)
  call expect_status(run, status, LIMNO_BAD_CLOCK, "asking about a time that is not a number")
  call expect(.not. due, "a step with a wrong clock is not due")

  call mark_step(run, 5)
  call limno_lend(run, "gass", "mass", mass, status)
  call expect_status(run, status, LIMNO_UNKNOWN_NAME, "a species that does not exist", "gas")
  call limno_lend(run, "gas", "weight", mass, status)
  call expect_status(run, status, LIMNO_UNKNOWN_NAME, "a field that does not exist", "weight")
  call limno_lend(run, "gas ", "mass   ", mass, status)
  call expect_status(run, status, LIMNO_OK, "names with trailing blanks")
  call limno_lend(run, "gas", "internal_energy", shorter, status)
  call expect_status(run, status, LIMNO_BAD_ARGUMENT, "counts that disagree", "5")
  call limno_lend(run, "gas", "position", mass, status)
  call expect_status(run, status, LIMNO_BAD_ARGUMENT, "one number where three are due", &
                     "gas position")
  call limno_lend(run, "star", "id", mass, status)
  call expect_status(run, status, LIMNO_BAD_ARGUMENT, "identities that are no integers", "star id")

  call limno_lend(run, "star", "mass", unallocated, status)
  call expect_status(run, status, LIMNO_BAD_ARGUMENT, "an array that is not allocated", &
                     "star mass: the array is not allocated")
  call limno_lend(run, "star", "mass", nowhere, status)
  call expect_status(run, status, LIMNO_BAD_ARGUMENT, "a pointer to nothing", "not associated")
  call limno_lend_constant(run, "star", "mass", no_value, 3, status)
  call expect_status(run, status, LIMNO_BAD_ARGUMENT, "a constant that is not there", "associated")
  call limno_lend_constant(run, "star", "mass", value, -3, status)
  call expect_status(run, status, LIMNO_BAD_ARGUMENT, "a negative count", "-3")
  call limno_lend(run, "star", "velocity", mass, shorter, mass, status)
  call expect_status(run, status, LIMNO_BAD_ARGUMENT, "components of different length", &
                     "8, 5 and 8")
  x => mass(1:8:2)
  y => mass(1:4)
  z => mass(1:4)
  call limno_lend(run, "star", "velocity", x, y, z, status)
  call expect_status(run, status, LIMNO_BAD_ARGUMENT, "components unequally far apart", &
                     "16, 8 and 8")
  call limno_lend(run, "stars", "velocity", x, y, z, status)
  call expect_status(run, status, LIMNO_UNKNOWN_NAME, "two things wrong at once", "star")

  call limno_tally(run, "winds", mass=mass, status=status)
  call expect_status(run, status, LIMNO_UNKNOWN_NAME, "a channel that does not exist", "wind")
  call limno_tally(run, "wind", mass=mass, energy=shorter, status=status)
  call expect_status(run, status, LIMNO_BAD_ARGUMENT, "a tally of unequal arrays", "energy")
  call limno_tally(run, "wind", mass=mass, position=vector(1:2, :), status=status)
  call expect_status(run, status, LIMNO_BAD_ARGUMENT, "a tally with flat positions", "position")
  call limno_tally(run, "wind", status=status)
  call expect_status(run, status, LIMNO_BAD_ARGUMENT, "a tally of nothing", "tally")
  call limno_tally(run, "wind", mass=[not_a_number], status=status)
  call expect_status(run, status, LIMNO_BAD_ARGUMENT, "a tally that is not a number", "finite")
  call limno_tally(run, "wind", count=-1, status=status)
  call expect_status(run, status, LIMNO_BAD_ARGUMENT, "a negative number of events", "negative")
  call limno_tally(run, "wind", mass=mass(1:8:3), energy=2*mass(1:3), position=vector(:, 1:3), &
                   status=status)
  call expect_status(run, status, LIMNO_OK, "a tally of sections and expressions")
  call limno_tally(run, "wind", count=4, status=status)
  call expect_status(run, status, LIMNO_OK, "a tally of events of which nothing else is known")

  call limno_sound(run, "stars", status)
  call expect_status(run, status, LIMNO_UNKNOWN_NAME, "sounding a species that does not exist")
  call limno_enter(run)
  call limno_mark(run, limno_clock(step=6, time=4.0_real64), status)
  call expect_status(run, status, LIMNO_BAD_CLOCK, "time that goes backwards")
  call limno_enter(run)

  ! Nobody asks for the status: it all goes on.
  call limno_lend(run, "star", "mass", nowhere)
  call limno_mark(run, limno_clock(step=7, time=not_a_number))
  call limno_enter(run)

  call mark_step(run, 8)
  call limno_lend(run, "gas", "mass", mass, status)
  call expect_status(run, status, LIMNO_OK, "lending after many errors")
  call limno_enter(run, status)
  call expect_status(run, status, LIMNO_OK, "a whole step after many errors")
  call limno_how_it_stands(run, standing, status)
  call expect_status(run, status, LIMNO_OK, "asking how the run stands")
  call expect(.not. standing%asleep, "errors of the host do not put a run to sleep")

  call limno_close(run, status)
  call expect_status(run, status, LIMNO_OK, "closing the run")
  call limno_close(run, status)
  call expect_status(run, status, LIMNO_CLOSED, "closing it again")
  call limno_lend(run, "star", "velocity", mass, shorter, mass, status)
  call expect_status(run, status, LIMNO_CLOSED, "lending what is wrong to a closed run")
  call expect(limno_status_name(LIMNO_BAD_CLOCK) == "LIMNO_BAD_CLOCK", "statuses have names")
  call expect(limno_version()/100 == LIMNO_MODULE_VERSION/100, &
              "module and library are of one version")
  call finish()
end program errors_are_statuses
