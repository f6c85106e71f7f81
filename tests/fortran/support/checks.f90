! What the tests share, included at their top: checks that are counted, a config, and a folder for
! what is written, which is their first argument.
module checks
  use, intrinsic :: iso_fortran_env, only: error_unit, int32, int64, real32, real64
  use limnograph
  implicit none
  public

  character(len=1), parameter :: newline = new_line("a")

  ! A host in kpc, Msun, km/s, in a universe that does not expand.
  character(len=*), parameter :: plain_config = &
    "[cosmology]"//newline//"expanding = false"//newline// &
    "[units]"//newline//"length = 'kpc'"//newline//"mass = 'Msun'"//newline// &
    "velocity = 'km/s'"//newline// &
    "[time]"//newline//"coordinate = 't'"//newline// &
    "[volume]"//newline//"none = true"//newline// &
    "[elements]"//newline//"names = ['carbon', 'oxygen']"//newline// &
    "[gauges]"//newline//"mass_budget = true"//newline//"tallies = true"//newline// &
    "wind_shells = { lengths = 'physical', unit = 'kpc', edges = [0, 1, 2], "// &
    "station = { position = [0, 0, 0] } }"//newline

  integer, private :: failures = 0

contains

  subroutine expect(is_so, promise)
    logical, intent(in) :: is_so
    character(len=*), intent(in) :: promise
    if (is_so) return
    failures = failures + 1
    write (error_unit, "(2a)") "broken: ", promise
  end subroutine expect

  ! The status is as it should be, and the text of an error says what it should.
  subroutine expect_status(run, status, wanted, what, says)
    type(limno_run), intent(in) :: run
    integer, intent(in) :: status, wanted
    character(len=*), intent(in) :: what
    character(len=*), intent(in), optional :: says
    call expect(status == wanted, what//" gives "//limno_status_name(wanted)//", not "// &
                limno_status_name(status)//" ("//limno_last_error(run)//")")
    if (.not. present(says)) return
    call expect(index(limno_last_error(run), says) > 0, what//" is explained with """//says// &
                """: "//limno_last_error(run))
  end subroutine expect_status

  ! A path in the folder.
  function place(name) result(path)
    character(len=*), intent(in) :: name
    character(len=:), allocatable :: path
    character(len=1000) :: folder
    folder = "."
    if (command_argument_count() > 0) call get_command_argument(1, folder)
    path = trim(folder)//"/"//name
  end function place

  ! Opens a run alone, on a series of this name.
  subroutine open_plain(name, run)
    character(len=*), intent(in) :: name
    type(limno_run), intent(out) :: run
    integer :: status
    call limno_open("inline", place(name//".limno"), run, config_text=plain_config, &
                    host_name=name, status=status)
    call expect_status(run, status, LIMNO_OK, "opening a run")
  end subroutine open_plain

  ! Marks a step, at a time equal to its number.
  subroutine mark_step(run, step)
    type(limno_run), intent(inout) :: run
    integer, intent(in) :: step
    integer :: status
    call limno_mark(run, limno_clock(step=int(step, int64), time=real(step, real64)), status)
    call expect_status(run, status, LIMNO_OK, "marking a step")
  end subroutine mark_step

  subroutine finish()
    if (failures > 0) stop 1
    print "(a)", "ok"
  end subroutine finish
end module checks
