! Reals and integers of 32 and 64 bits, of rank 1, of rank 2 and as three arrays, and constants.
! flags: tests/fortran/support/recorder.c -Iinclude -Wl,--wrap=limno_lend_array
include "support/checks.f90"
include "support/recorder.f90"

program every_type_is_lent
  use recorder
  implicit none

  integer, parameter :: f32 = 1, f64 = 2, i32 = 3, i64 = 5
  type(limno_run) :: run
  real(real32), allocatable, target :: a(:), a3(:, :)
  real(real64), allocatable, target :: b(:), b3(:, :)
  integer(int32), allocatable, target :: c(:), c3(:, :)
  integer(int64), allocatable, target :: d(:), d3(:, :)
  real(real32), pointer :: ap(:), ap3(:, :)
  real(real64), pointer :: bp(:), bp3(:, :)
  integer(int32), pointer :: cp(:), cp3(:, :)
  integer(int64), pointer :: dp(:), dp3(:, :)
  real(real32), target :: one_32
  real(real64), target :: one_64
  integer :: status

  call open_plain("every_type_is_lent", run)
  call mark_step(run, 1)
  allocate (a(6), a3(3, 6), b(6), b3(3, 6), c(6), c3(3, 6), d(6), d3(3, 6))
  a = 1; a3 = 1; b = 1; b3 = 1; c = 1; c3 = 1; d = 1; d3 = 1
  ap => a; ap3 => a3; bp => b; bp3 => b3; cp => c; cp3 => c3; dp => d; dp3 => d3

  call limno_lend(run, "gas", "mass", a, status)
  call see("real32", 1, f32, c_loc(a(6)))
  call limno_lend(run, "gas", "mass", b, status)
  call see("real64", 1, f64, c_loc(b(6)))
  call limno_lend(run, "gas", "mass", c, status)
  call see("int32", 1, i32, c_loc(c(6)))
  call limno_lend(run, "gas", "id", d, status)
  call see("int64", 1, i64, c_loc(d(6)))

  call limno_lend(run, "gas", "mass", ap, status)
  call see("real32 pointer", 1, f32, c_loc(a(6)))
  call limno_lend(run, "gas", "mass", bp, status)
  call see("real64 pointer", 1, f64, c_loc(b(6)))
  call limno_lend(run, "gas", "id", cp, status)
  call see("int32 pointer", 1, i32, c_loc(c(6)))
  call limno_lend(run, "gas", "mass", dp, status)
  call see("int64 pointer", 1, i64, c_loc(d(6)))

  call limno_lend(run, "gas", "position", a3, status)
  call see("real32 of rank 2", 3, f32, c_loc(a3(1, 6)))
  call limno_lend(run, "gas", "position", b3, status)
  call see("real64 of rank 2", 3, f64, c_loc(b3(1, 6)))
  call limno_lend(run, "gas", "position", c3, status)
  call see("int32 of rank 2", 3, i32, c_loc(c3(1, 6)))
  call limno_lend(run, "gas", "position", d3, status)
  call see("int64 of rank 2", 3, i64, c_loc(d3(1, 6)))

  call limno_lend(run, "gas", "position", ap3, status)
  call see("real32 pointer of rank 2", 3, f32, c_loc(a3(1, 6)))
  call limno_lend(run, "gas", "position", bp3, status)
  call see("real64 pointer of rank 2", 3, f64, c_loc(b3(1, 6)))
  call limno_lend(run, "gas", "position", cp3, status)
  call see("int32 pointer of rank 2", 3, i32, c_loc(c3(1, 6)))
  call limno_lend(run, "gas", "position", dp3, status)
  call see("int64 pointer of rank 2", 3, i64, c_loc(d3(1, 6)))

  call limno_lend(run, "gas", "velocity", a, a, a, status)
  call see("three arrays of real32", 3, f32, c_loc(a(6)))
  call limno_lend(run, "gas", "velocity", b, b, b, status)
  call see("three arrays of real64", 3, f64, c_loc(b(6)))
  call limno_lend(run, "gas", "velocity", c, c, c, status)
  call see("three arrays of int32", 3, i32, c_loc(c(6)))
  call limno_lend(run, "gas", "velocity", d, d, d, status)
  call see("three arrays of int64", 3, i64, c_loc(d(6)))

  call limno_lend(run, "gas", "velocity", ap, ap, ap, status)
  call see("three pointers to real32", 3, f32, c_loc(a(6)))
  call limno_lend(run, "gas", "velocity", bp, bp, bp, status)
  call see("three pointers to real64", 3, f64, c_loc(b(6)))
  call limno_lend(run, "gas", "velocity", cp, cp, cp, status)
  call see("three pointers to int32", 3, i32, c_loc(c(6)))
  call limno_lend(run, "gas", "velocity", dp, dp, dp, status)
  call see("three pointers to int64", 3, i64, c_loc(d(6)))

  one_32 = 1
  one_64 = 1
  call limno_lend_constant(run, "gas", "mass", one_32, 6, status)
  call see("a constant of real32", 1, f32, c_loc(one_32))
  call limno_lend_constant(run, "gas", "mass", one_32, 6_int64, status)
  call see("a constant of real32, counted in 64 bits", 1, f32, c_loc(one_32))
  call limno_lend_constant(run, "gas", "mass", one_64, 6_int64, status)
  call see("a constant of real64, counted in 64 bits", 1, f64, c_loc(one_64))
  call limno_lend_constant(run, "gas", "mass", one_64, 6, status)
  call see("a constant of real64", 1, f64, c_loc(one_64))

  call limno_enter(run, status)
  call expect_status(run, status, LIMNO_OK, "entering the step")
  call limno_close(run)
  call finish()

contains

  ! What was lent is of this type, and the first number of its sixth element is there.
  subroutine see(what, components, scalar, place)
    character(len=*), intent(in) :: what
    integer, intent(in) :: components, scalar
    type(c_ptr), intent(in) :: place
    call expect_status(run, status, LIMNO_OK, "lending "//what)
    call expect_shape(components, 6, what)
    call expect(recorded_scalar() == scalar, what//": type of the numbers")
    call expect_address(1, 6, place, what)
  end subroutine see
end program every_type_is_lent
