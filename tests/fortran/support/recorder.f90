! What the library was told of the array that was lent last; needs recorder.c, and checks.f90
! before it.
module recorder
  use, intrinsic :: iso_c_binding, only: c_intptr_t, c_loc, c_ptr
  use checks
  implicit none
  public

  ! recorder.c: the description that limno_lend_array was given last, as limnograph.h explains it.
  ! Components and elements count from 0.
  interface
    function recorded_address(component, element) bind(c) result(address)
      import :: c_intptr_t
      integer(c_intptr_t), value :: component, element
      integer(c_intptr_t) :: address
    end function recorded_address
    function recorded_count() bind(c) result(count)
      import :: c_intptr_t
      integer(c_intptr_t) :: count
    end function recorded_count
    function recorded_components() bind(c) result(components)
      import :: c_intptr_t
      integer(c_intptr_t) :: components
    end function recorded_components
    function recorded_scalar() bind(c) result(scalar)
      import :: c_intptr_t
      integer(c_intptr_t) :: scalar
    end function recorded_scalar
  end interface

contains

  ! The library will read component `component` of element `element` (both from 1) where it stands.
  subroutine expect_address(component, element, place, what)
    integer, intent(in) :: component, element
    type(c_ptr), intent(in) :: place
    character(len=*), intent(in) :: what
    character(len=60) :: numbers
    integer(c_intptr_t) :: wanted, found
    wanted = transfer(place, wanted)
    found = recorded_address(int(component - 1, c_intptr_t), int(element - 1, c_intptr_t))
    write (numbers, "(a, i0, a, i0, a, i0, a)") " (", component, ", ", element, "), off by ", &
      found - wanted, " bytes"
    call expect(found == wanted, what//" is lent where it stands"//trim(numbers))
  end subroutine expect_address

  subroutine expect_shape(components, count, what)
    integer, intent(in) :: components, count
    character(len=*), intent(in) :: what
    call expect(recorded_components() == components, what//": number of components")
    call expect(recorded_count() == count, what//": number of elements")
  end subroutine expect_shape
end module recorder
