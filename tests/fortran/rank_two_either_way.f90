! A vector field is an array (3, n), or (n, 3) when the host says so, also where n is 3. What is
! neither is refused, with a text that says what to do.
! flags: tests/fortran/support/recorder.c -Iinclude -Wl,--wrap=limno_lend_array
include "support/checks.f90"
include "support/recorder.f90"

program rank_two_either_way
  use recorder
  implicit none

  type(limno_run) :: run
  real(real64), allocatable, target :: first(:, :), last(:, :), square(:, :), elements(:, :)
  real(real32), pointer :: part(:, :)
  real(real32), allocatable, target :: wide(:, :)
  integer(int32), allocatable, target :: whole_numbers(:, :)
  integer :: i, c, status

  call open_plain("rank_two_either_way", run)
  call mark_step(run, 1)
  allocate (first(3, 5), last(5, 3), square(3, 3), wide(4, 10), elements(2, 5), whole_numbers(3, 5))
  first = 1.0_real64
  last = 1.0_real64
  square = 1.0_real64
  wide = 1.0_real32
  elements = 0.1_real64
  whole_numbers = 1

  call limno_lend(run, "gas", "position", first, status)
  call accept("an array (3, 5)", 5)
  do i = 1, 5
    do c = 1, 3
      call expect_address(c, i, c_loc(first(c, i)), "an array (3, 5)")
    end do
  end do

  call limno_lend(run, "gas", "velocity", last, status, components_last=.true.)
  call accept("an array (5, 3)", 5)
  do i = 1, 5
    do c = 1, 3
      call expect_address(c, i, c_loc(last(i, c)), "an array (5, 3)")
    end do
  end do

  call limno_lend(run, "star", "position", square, status)
  call accept("a square array", 3)
  call expect_address(2, 3, c_loc(square(2, 3)), "a square array")

  call limno_lend(run, "star", "velocity", square, status, components_last=.true.)
  call accept("a square array the other way", 3)
  call expect_address(2, 3, c_loc(square(3, 2)), "a square array the other way")

  call limno_lend(run, "gas", "element_fraction", elements, status)
  call expect_status(run, status, LIMNO_OK, "lending as many components as there are elements")
  call expect_shape(2, 5, "element fractions")
  call expect_address(2, 4, c_loc(elements(2, 4)), "element fractions")

  call limno_lend(run, "wind", "position", whole_numbers, status)
  call accept("whole numbers", 5)

  ! Every fifth column of three rows out of four: one element, or two.
  part => wide(1:3, 5::5)
  call limno_lend(run, "black_hole", "position", part, status)
  call accept("part of a wider array", 2)
  call expect_address(3, 2, c_loc(wide(3, 10)), "part of a wider array")
  part => wide(4:2:-1, 7:8)
  call limno_lend(run, "black_hole", "velocity", part, status)
  call accept("components backwards", 2)
  call expect_address(1, 1, c_loc(wide(4, 7)), "components backwards")
  call expect_address(3, 2, c_loc(wide(2, 8)), "components backwards")

  part => wide(1:3, 4:4)
  call limno_lend(run, "dark_matter", "position", part, status)
  call accept("one element", 1)
  call expect_address(3, 1, c_loc(wide(3, 4)), "one element")
  part => wide(2:2, 1:3)
  call limno_lend(run, "dark_matter", "velocity", part, status, components_last=.true.)
  call accept("one element the other way", 1)
  call expect_address(3, 1, c_loc(wide(2, 3)), "one element the other way")

  call limno_enter(run, status)
  call expect_status(run, status, LIMNO_OK, "entering the step")

  call mark_step(run, 2)
  part => wide(1:3, 5:4)
  call limno_lend(run, "gas", "position", part, status)
  call accept("no element", 0)
  part => wide(3:2, 1:3)
  call limno_lend(run, "gas", "velocity", part, status, components_last=.true.)
  call accept("no element the other way", 0)

  call limno_lend(run, "star", "position", last, status)
  call expect_status(run, status, LIMNO_BAD_ARGUMENT, "an array (5, 3) without a word", "(5, 3)")
  call expect_status(run, status, LIMNO_BAD_ARGUMENT, "the same", "components_last")
  call limno_lend(run, "star", "position", first, status, components_last=.true.)
  call expect_status(run, status, LIMNO_BAD_ARGUMENT, "an array (3, 5) said to be (n, 3)", "(3, 5)")
  call limno_lend(run, "star", "mass", first, status)
  call expect_status(run, status, LIMNO_BAD_ARGUMENT, "a vector as a mass", "star mass")

  call limno_enter(run)
  call limno_close(run)
  call finish()

contains

  subroutine accept(what, count)
    character(len=*), intent(in) :: what
    integer, intent(in) :: count
    call expect_status(run, status, LIMNO_OK, "lending "//what)
    call expect_shape(3, count, what)
  end subroutine accept
end program rank_two_either_way
