! limno_due says which steps will be measured, limno_flush completes them, and limno_how_it_stands tells how many
! have been.
include "support/checks.f90"

program what_is_due_is_known_beforehand
  use checks
  implicit none

  type(limno_run) :: run
  type(limno_clock) :: clock
  type(limno_standing) :: standing
  real(real64), allocatable, target :: mass(:)
  logical :: due
  integer :: status, step

  allocate (mass(3))
  mass = 1.0_real64
  call limno_open("inline", place("what_is_due_is_known_beforehand.limno"), run, status=status, &
                  config_text=plain_config//"[cadence]"//newline//"every_steps = 4"//newline)
  call expect_status(run, status, LIMNO_OK, "opening a run with a cadence")
  do step = 1, 11
    clock = limno_clock(step=int(step, int64), time=0.5_real64*step, checkpoint=step == 10)
    call limno_due(run, clock, due, status)
    call expect_status(run, status, LIMNO_OK, "asking whether a step is due")
    call expect(due .eqv. any(step == [1, 4, 8, 10]), "the first, fourth, eighth step and the "// &
                "checkpoint are due, and no other")
    call limno_mark(run, clock, status)
    call expect_status(run, status, LIMNO_OK, "marking a step")
    call limno_lend(run, "gas", "mass", mass, status)
    call expect_status(run, status, LIMNO_OK, "lending on any step")
    call limno_enter(run, status)
    call expect_status(run, status, LIMNO_OK, "entering a step")
  end do
  call limno_flush(run, status)
  call expect_status(run, status, LIMNO_OK, "flushing")
  call limno_how_it_stands(run, standing, status)
  call expect_status(run, status, LIMNO_OK, "asking how the run stands")
  call expect(standing%rows == 4 .and. standing%rows_lost == 0, "four rows were entered")
  call expect(standing%rows_written >= 3, "the rows up to the checkpoint are written")
  call expect(standing%seconds > 0.0_real64, "the run knows how long it took")
  call limno_close(run, status)
  call expect_status(run, status, LIMNO_OK, "closing the run")
  call finish()
end program what_is_due_is_known_beforehand
