! limnograph.f90 says the same as limnograph.h: constants, structs, and which functions there are.
! Runs in the top directory.
! flags: tests/fortran/support/layouts.c -Iinclude
include "support/checks.f90"

program module_agrees_with_the_header
  use, intrinsic :: iso_c_binding
  use checks
  use limnograph_interface
  implicit none

  interface
    function offset_in_c(name) bind(c) result(offset)
      import :: c_char, c_intptr_t
      character(kind=c_char), intent(in) :: name(*)
      integer(c_intptr_t) :: offset
    end function offset_in_c
    function size_in_c(name) bind(c) result(number)
      import :: c_char, c_intptr_t
      character(kind=c_char), intent(in) :: name(*)
      integer(c_intptr_t) :: number
    end function size_in_c
  end interface

  ! Functions that the module has no use for: limno_lend_array does for all ways of lending.
  character(len=*), parameter :: not_needed(*) = [character(len=30) :: &
    "limno_open_communicator", "limno_lend", "limno_lend_vector", "limno_lend_xyz", &
    "limno_describe", "limno_lend_again", "limno_lend_again_arrays"]

  character(len=:), allocatable :: header, module_source

  header = text_of("include/limnograph.h")
  module_source = text_of("include/limnograph.f90")
  call expect(index(header, "#define LIMNO_VERSION "//number(LIMNO_MODULE_VERSION)//newline) > 0, &
              "LIMNO_MODULE_VERSION is the header's LIMNO_VERSION")
  call check_constants()
  call check_functions()
  call check_options()
  call check_clock()
  call check_array()
  call check_tally()
  call check_standing()
  call finish()

contains

  ! Every LIMNO_NAME = number of the header stands in the module.
  subroutine check_constants()
    integer :: at, ends, equals, found
    character(len=:), allocatable :: line, name, value
    found = 0
    at = 1
    do
      ends = index(header(at:), newline) + at - 1
      if (ends < at) exit
      line = trim(adjustl(header(at:ends - 1)))
      at = ends + 1
      equals = index(line, " = ")
      if (index(line, "LIMNO_") /= 1 .or. equals == 0) cycle
      name = line(:equals - 1)
      value = line(equals + 3:scan(line, ",") - 1)
      found = found + 1
      if (scan(name(7:7), "FIU") == 1 .and. verify(name(8:), "0123456789") == 0) then
        call expect(has("c_"//lower(name(7:))//" = "//value//"_c_int32_t"), name//" is "//value)
      else
        call expect(has(":: "//name//" = "//value//newline), name//" is "//value)
      end if
    end do
    call expect(found >= 21, "the header's constants are found")
  end subroutine check_constants

  ! Every function of the header is bound, or known not to be needed.
  subroutine check_functions()
    integer :: at, ends, bracket, start, found
    character(len=:), allocatable :: name
    found = 0
    at = index(header, 'extern "C" {')
    do
      ends = index(header(at:), newline) + at - 1
      if (ends < at) exit
      bracket = index(header(at:ends), "(")
      if (scan(header(at:at), "abcdefghijklmnopqrstuvwxyz") == 1 .and. bracket > 0) then
        start = scan(header(at:at + bracket - 1), " *", back=.true.)
        name = header(at + start:at + bracket - 2)
        found = found + 1
        call expect(has('name="'//name//'"') .neqv. any(not_needed == name), name// &
                    " is bound in the module or known not to be needed")
      end if
      at = ends + 1
    end do
    call expect(found >= 20, "the header's functions are found")
  end subroutine check_functions

  subroutine check_options()
    type(c_options), target :: it
    call check_struct("limno_options", c_sizeof(it))
    call check("limno_options.size", c_loc(it), c_loc(it%size), c_sizeof(it%size))
    call check("limno_options.host_name", c_loc(it), c_loc(it%host_name), c_sizeof(it%host_name))
    call check("limno_options.host_version", c_loc(it), c_loc(it%host_version), &
               c_sizeof(it%host_version))
    call check("limno_options.description", c_loc(it), c_loc(it%description), &
               c_sizeof(it%description))
    call check("limno_options.config_text", c_loc(it), c_loc(it%config_text), &
               c_sizeof(it%config_text))
    call check("limno_options.threads", c_loc(it), c_loc(it%threads), c_sizeof(it%threads))
  end subroutine check_options

  subroutine check_clock()
    type(c_clock), target :: it
    call check_struct("limno_clock", c_sizeof(it))
    call check("limno_clock.size", c_loc(it), c_loc(it%size), c_sizeof(it%size))
    call check("limno_clock.step", c_loc(it), c_loc(it%step), c_sizeof(it%step))
    call check("limno_clock.time", c_loc(it), c_loc(it%time), c_sizeof(it%time))
    call check("limno_clock.step_length", c_loc(it), c_loc(it%step_length), &
               c_sizeof(it%step_length))
    call check("limno_clock.synchronised", c_loc(it), c_loc(it%synchronised), &
               c_sizeof(it%synchronised))
    call check("limno_clock.checkpoint", c_loc(it), c_loc(it%checkpoint), c_sizeof(it%checkpoint))
  end subroutine check_clock

  subroutine check_array()
    type(c_array), target :: it
    call check_struct("limno_array", c_sizeof(it))
    call check("limno_array.size", c_loc(it), c_loc(it%size), c_sizeof(it%size))
    call check("limno_array.scalar", c_loc(it), c_loc(it%scalar), c_sizeof(it%scalar))
    call check("limno_array.components", c_loc(it), c_loc(it%components), c_sizeof(it%components))
    call check("limno_array.data", c_loc(it), c_loc(it%data), c_sizeof(it%data))
    call check("limno_array.arrays", c_loc(it), c_loc(it%arrays), c_sizeof(it%arrays))
    call check("limno_array.stride", c_loc(it), c_loc(it%stride), c_sizeof(it%stride))
    call check("limno_array.component_stride", c_loc(it), c_loc(it%component_stride), &
               c_sizeof(it%component_stride))
  end subroutine check_array

  subroutine check_tally()
    type(c_tally_batch), target :: it
    call check_struct("limno_tally_batch", c_sizeof(it))
    call check("limno_tally_batch.size", c_loc(it), c_loc(it%size), c_sizeof(it%size))
    call check("limno_tally_batch.channel", c_loc(it), c_loc(it%channel), c_sizeof(it%channel))
    call check("limno_tally_batch.count", c_loc(it), c_loc(it%count), c_sizeof(it%count))
    call check("limno_tally_batch.mass", c_loc(it), c_loc(it%mass), c_sizeof(it%mass))
    call check("limno_tally_batch.momentum", c_loc(it), c_loc(it%momentum), c_sizeof(it%momentum))
    call check("limno_tally_batch.energy", c_loc(it), c_loc(it%energy), c_sizeof(it%energy))
    call check("limno_tally_batch.metals", c_loc(it), c_loc(it%metals), c_sizeof(it%metals))
    call check("limno_tally_batch.elements", c_loc(it), c_loc(it%elements), c_sizeof(it%elements))
    call check("limno_tally_batch.position", c_loc(it), c_loc(it%position), c_sizeof(it%position))
    call check("limno_tally_batch.particle_id", c_loc(it), c_loc(it%particle_id), &
               c_sizeof(it%particle_id))
    call check("limno_tally_batch.elements_each", c_loc(it), c_loc(it%elements_each), &
               c_sizeof(it%elements_each))
  end subroutine check_tally

  subroutine check_standing()
    type(c_standing), target :: it
    call check_struct("limno_standing", c_sizeof(it))
    call check("limno_standing.size", c_loc(it), c_loc(it%size), c_sizeof(it%size))
    call check("limno_standing.asleep", c_loc(it), c_loc(it%asleep), c_sizeof(it%asleep))
    call check("limno_standing.rows", c_loc(it), c_loc(it%rows), c_sizeof(it%rows))
    call check("limno_standing.rows_written", c_loc(it), c_loc(it%rows_written), &
               c_sizeof(it%rows_written))
    call check("limno_standing.rows_lost", c_loc(it), c_loc(it%rows_lost), c_sizeof(it%rows_lost))
    call check("limno_standing.seconds", c_loc(it), c_loc(it%seconds), c_sizeof(it%seconds))
  end subroutine check_standing

  subroutine check_struct(name, bytes)
    character(len=*), intent(in) :: name
    integer(c_size_t), intent(in) :: bytes
    call expect(bytes == size_in_c(name//c_null_char), name//" has the size that C gives it")
  end subroutine check_struct

  subroutine check(name, start, member, bytes)
    character(len=*), intent(in) :: name
    type(c_ptr), intent(in) :: start, member
    integer(c_size_t), intent(in) :: bytes
    integer(c_intptr_t) :: offset
    offset = transfer(member, offset) - transfer(start, offset)
    call expect(offset == offset_in_c(name//c_null_char), name//" stands where C has it")
    call expect(bytes == size_in_c(name//c_null_char), name//" has the size that C gives it")
  end subroutine check

  logical function has(text)
    character(len=*), intent(in) :: text
    has = index(module_source, text) > 0
  end function has

  function lower(text) result(small)
    character(len=*), intent(in) :: text
    character(len=len(text)) :: small
    integer :: at
    do at = 1, len(text)
      small(at:at) = text(at:at)
      if (lge(text(at:at), "A") .and. lle(text(at:at), "Z")) small(at:at) = &
        achar(iachar(text(at:at)) + 32)
    end do
  end function lower

  function number(value) result(text)
    integer, intent(in) :: value
    character(len=:), allocatable :: text
    character(len=12) :: buffer
    write (buffer, "(i0)") value
    text = trim(buffer)
  end function number

  function text_of(path) result(text)
    character(len=*), intent(in) :: path
    character(len=:), allocatable :: text
    integer :: unit, bytes
    open (newunit=unit, file=path, access="stream", status="old", action="read")
    inquire (unit=unit, size=bytes)
    allocate (character(len=bytes) :: text)
    read (unit) text
    close (unit)
  end function text_of
end program module_agrees_with_the_header
