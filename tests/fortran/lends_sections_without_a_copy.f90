! Whatever a pointer may point at is lent where it stands: members of an array of derived type,
! every other element, backwards, parts of a state array, a mesh.
! flags: tests/fortran/support/recorder.c -Iinclude -Wl,--wrap=limno_lend_array
include "support/checks.f90"
include "support/recorder.f90"

program lends_sections_without_a_copy
  use recorder
  implicit none

  ! Members of several sizes, so that a stride is no multiple of every one of them.
  type :: element
    real(real64) :: velocity(3)
    real(real64) :: mass
    integer(int32) :: kind
    real(real32) :: energy
    real(real32) :: metallicity
  end type element

  type :: store
    real(real64), allocatable :: mass(:)
  end type store

  integer, parameter :: n = 12
  type(limno_run) :: run
  type(element), allocatable, target :: gas(:)
  type(element), pointer :: part(:)
  type(store), target :: separate
  real(real64), allocatable, target :: state(:, :), mesh(:, :, :), counted_from_zero(:)
  real(real64), pointer :: mass(:), x(:), y(:), z(:), vector(:, :)
  real(real32), pointer :: energy(:)
  integer :: i, c, status

  call open_plain("lends_sections_without_a_copy", run)
  call mark_step(run, 1)
  allocate (gas(n), state(n, 7), mesh(3, 4, 2), counted_from_zero(0:4), separate%mass(5))
  state = 1.0_real64
  mesh = 1.0_real64
  counted_from_zero = 1.0_real64
  separate%mass = 1.0_real64
  gas = element([0.0_real64, 0.0_real64, 0.0_real64], 1.0_real64, 1, 1.0_real32, 0.0_real32)

  mass => gas%mass
  call lend("a member of all elements", n)
  do i = 1, n
    call expect_address(1, i, c_loc(gas(i)%mass), "a member")
  end do

  part => gas(3:10)
  mass => part(8:2:-3)%mass
  call lend("every third member, backwards", 3)
  do i = 1, 3
    call expect_address(1, i, c_loc(gas(10 - 3*(i - 1))%mass), "every third member, backwards")
  end do

  mass => gas(7:7)%mass
  call lend("the member of one element", 1)
  call expect_address(1, 1, c_loc(gas(7)%mass), "the member of one element")

  mass => gas(7:6)%mass
  call lend("the member of no element", 0)

  energy => gas(2::2)%energy
  call limno_lend(run, "wind", "internal_energy", energy, status)
  call expect_status(run, status, LIMNO_OK, "lending a 32-bit member")
  do i = 1, n/2
    call expect_address(1, i, c_loc(gas(2*i)%energy), "a 32-bit member")
  end do

  call sound_all()
  x => gas%velocity(1)
  y => gas%velocity(2)
  z => gas%velocity(3)
  call limno_lend(run, "wind", "velocity", x, y, z, status)
  call expect_status(run, status, LIMNO_OK, "lending a vector member")
  call expect_shape(3, n, "a vector member")
  do i = 1, n
    do c = 1, 3
      call expect_address(c, i, c_loc(gas(i)%velocity(c)), "a vector member")
    end do
  end do

  mass => state(n:1:-2, 5)
  call lend("part of a state array, backwards", n/2)
  do i = 1, n/2
    call expect_address(1, i, c_loc(state(n - 2*(i - 1), 5)), "part of a state array")
  end do

  vector => state(2::3, 2:6:2)
  call limno_lend(run, "star", "position", vector, status, components_last=.true.)
  call expect_status(run, status, LIMNO_OK, "lending parts of a state array")
  call expect_shape(3, 4, "parts of a state array")
  do i = 1, 4
    do c = 1, 3
      call expect_address(c, i, c_loc(state(2 + 3*(i - 1), 2*c)), "parts of a state array")
    end do
  end do

  mass(1:size(mesh)) => mesh
  call lend("a mesh", size(mesh))
  call expect_address(1, 24, c_loc(mesh(3, 4, 2)), "a mesh")

  call limno_lend(run, "black_hole", "mass", counted_from_zero, status)
  call expect_status(run, status, LIMNO_OK, "lending an array that counts from 0")
  call expect_shape(1, 5, "an array that counts from 0")
  call expect_address(1, 1, c_loc(counted_from_zero(0)), "an array that counts from 0")

  mass(-2:) => counted_from_zero(1:3)
  call lend("a pointer that counts from -2", 3)
  call expect_address(1, 1, c_loc(counted_from_zero(1)), "a pointer that counts from -2")

  call sound_all()
  call limno_lend(run, "wind", "mass", separate%mass, status)
  call expect_status(run, status, LIMNO_OK, "lending an allocatable member")
  call expect_address(1, 1, c_loc(separate%mass(1)), "an allocatable member")

  call limno_close(run)
  call finish()

contains

  ! Every field of a species must have the same count until it is sounded, so sound first.
  subroutine lend(what, count)
    character(len=*), intent(in) :: what
    integer, intent(in) :: count
    call sound_all()
    call limno_lend(run, "gas", "mass", mass, status)
    call expect_status(run, status, LIMNO_OK, "lending "//what)
    call expect_shape(1, count, what)
  end subroutine lend

  subroutine sound_all()
    call limno_sound(run, "gas", status)
    call expect_status(run, status, LIMNO_OK, "sounding the gas")
    call limno_sound(run, "wind", status)
    call expect_status(run, status, LIMNO_OK, "sounding the wind")
  end subroutine sound_all
end program lends_sections_without_a_copy
