! A Fortran host and a C host with the same particles write the same series, to the last digit.
! LIMNOGRAPH names the program.
! flags: tests/fortran/support/twin.c -Iinclude
include "support/checks.f90"

program same_numbers_as_c
  use, intrinsic :: iso_c_binding, only: c_char, c_int32_t, c_null_char
  use checks
  implicit none

  interface
    function c_twin(config, series) bind(c) result(status)
      import :: c_char, c_int32_t
      character(kind=c_char), intent(in) :: config(*), series(*)
      integer(c_int32_t) :: status
    end function c_twin
  end interface

  type :: element
    real(real64) :: position(3)
    real(real32) :: velocity(3)
    real(real32) :: mass
    integer(int32) :: id
  end type element

  integer, parameter :: gas_count = 3000, star_count = 700
  integer(int64) :: state = 1
  character(len=200) :: program_name
  integer :: status

  call get_environment_variable("LIMNOGRAPH", program_name, status=status)
  if (status /= 0) program_name = "limnograph"
  call run_in_fortran()
  status = c_twin(plain_config//c_null_char, place("of_c.limno")//c_null_char)
  call expect(status == LIMNO_OK, "the C half runs, not "//limno_status_name(status))
  call compare("run", 3)
  call compare("wind_shells", 6)
  call finish()

contains

  subroutine run_in_fortran()
    type(limno_run) :: run
    type(limno_clock) :: clock
    type(element), allocatable, target :: gas(:)
    real(real64), allocatable :: star_mass(:)
    real(real64), pointer :: x(:), y(:), z(:)
    real(real32), pointer :: vx(:), vy(:), vz(:), mass(:)
    integer(int32), pointer :: id(:)
    real(real64), target :: dark_mass
    real(real64) :: event(2)
    integer :: step, i

    allocate (gas(gas_count), star_mass(star_count))
    dark_mass = 0.1_real64
    call limno_open("inline", place("of_fortran.limno"), run, config_text=plain_config, &
                    host_name="twin", status=status)
    call expect_status(run, status, LIMNO_OK, "opening a run")
    do step = 1, 3
      do i = 1, gas_count
        gas(i)%position = [4*next() - 2, 4*next() - 2, 4*next() - 2]
        gas(i)%velocity = real([200*next() - 100, 200*next() - 100, 200*next() - 100], real32)
        gas(i)%mass = real(1e5_real64*next(), real32)
        gas(i)%id = i
      end do
      do i = 1, star_count
        star_mass(i) = 1e4_real64*next()
      end do
      event = [next(), next()]
      call limno_tally(run, "wind", mass=event, energy=event, status=status)
      call expect_status(run, status, LIMNO_OK, "tallying")

      x => gas%position(1)
      y => gas%position(2)
      z => gas%position(3)
      vx => gas%velocity(1)
      vy => gas%velocity(2)
      vz => gas%velocity(3)
      mass => gas%mass
      id => gas%id
      clock = limno_clock(int(step, int64), 0.1_real64*step, 0.1_real64)
      call limno_mark(run, clock, status)
      call expect_status(run, status, LIMNO_OK, "marking")
      call limno_lend(run, "gas", "position", x, y, z, status)
      call expect_status(run, status, LIMNO_OK, "lending positions")
      call limno_lend(run, "gas", "velocity", vx, vy, vz, status)
      call expect_status(run, status, LIMNO_OK, "lending velocities")
      call limno_lend(run, "gas", "mass", mass, status)
      call expect_status(run, status, LIMNO_OK, "lending masses")
      call limno_lend(run, "gas", "id", id, status)
      call expect_status(run, status, LIMNO_OK, "lending identities")
      call limno_lend(run, "star", "mass", star_mass, status)
      call expect_status(run, status, LIMNO_OK, "lending the stars' masses")
      call limno_sound(run, "star", status)
      call expect_status(run, status, LIMNO_OK, "sounding the stars")
      call limno_lend_constant(run, "dark_matter", "mass", dark_mass, 1000, status)
      call expect_status(run, status, LIMNO_OK, "lending a constant")
      call limno_enter(run, status)
      call expect_status(run, status, LIMNO_OK, "entering")
    end do
    call limno_close(run, status)
    call expect_status(run, status, LIMNO_OK, "closing")
  end subroutine run_in_fortran

  ! Lehmer's sequence, of 1 and less; C has the same.
  function next() result(number)
    real(real64) :: number
    state = mod(state*16807, 2147483647_int64)
    number = real(state, real64)/2147483647.0_real64
  end function next

  ! The table of both series has so many rows, and the same numbers, wall-clock times apart.
  subroutine compare(table, rows)
    character(len=*), intent(in) :: table
    integer, intent(in) :: rows
    character(len=20000) :: ours, theirs, head
    integer :: mine, yours, ends, their_ends, row
    call export("of_fortran", table)
    call export("of_c", table)
    open (newunit=mine, file=place("of_fortran_"//table//".csv"), status="old", action="read")
    open (newunit=yours, file=place("of_c_"//table//".csv"), status="old", action="read")
    read (mine, "(a)") head
    read (yours, "(a)") theirs
    call expect(head == theirs, table//" has the same columns")
    row = 0
    do
      read (mine, "(a)", iostat=ends) ours
      read (yours, "(a)", iostat=their_ends) theirs
      if (ends /= 0 .or. their_ends /= 0) exit
      row = row + 1
      call compare_cells(table, head, ours, theirs)
    end do
    call expect(ends /= 0 .and. their_ends /= 0 .and. row == rows, table//" has all rows, in both")
    close (mine)
    close (yours)
  end subroutine compare

  subroutine compare_cells(table, head, ours, theirs)
    character(len=*), intent(in) :: table, head, ours, theirs
    character(len=:), allocatable :: name, our_rest, their_rest, rest, mine, yours
    logical :: is_known
    rest = trim(head)//","
    our_rest = trim(ours)//","
    their_rest = trim(theirs)//","
    is_known = .false.
    do while (len(rest) > 0)
      call take(rest, name)
      call take(our_rest, mine)
      call take(their_rest, yours)
      if (index(name, "wall_clock") == 1 .or. index(name, "_seconds") > 0) cycle
      call expect(mine == yours, table//" "//name//": "//mine//" from Fortran, "//yours//" from C")
      if (index(name, "mass") > 0) is_known = is_known .or. verify(mine, "0.") > 0
    end do
    call expect(is_known, table//" holds numbers that are not 0")
  end subroutine compare_cells

  ! Takes the first cell of a line; none of these has a comma in it.
  subroutine take(rest, cell)
    character(len=:), allocatable, intent(inout) :: rest
    character(len=:), allocatable, intent(out) :: cell
    integer :: comma
    comma = max(index(rest, ","), 1)
    cell = rest(:comma - 1)
    rest = rest(comma + 1:)
  end subroutine take

  subroutine export(series, table)
    character(len=*), intent(in) :: series, table
    integer :: answer, failure
    call execute_command_line(trim(program_name)//" export "//place(series//".limno")// &
                              " --to csv --table "//table//" -o "// &
                              place(series//"_"//table//".csv"), exitstat=answer, cmdstat=failure)
    call expect(failure == 0 .and. answer == 0, "the program exports "//series//" "//table)
  end subroutine export
end program same_numbers_as_c
