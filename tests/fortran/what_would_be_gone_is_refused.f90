! The compiler refuses to lend what is a copy or is not there any more when limno_lend returns, and
! what some compilers would hand over wrongly. Runs in the top directory; FC names the compiler.
include "support/checks.f90"

program what_would_be_gone_is_refused
  use checks
  implicit none

  character(len=200) :: compiler
  integer :: status

  compiler = "gfortran"
  call get_environment_variable("FC", compiler, status=status)
  if (status /= 0) compiler = "gfortran"
  call expect(compiles("include/limnograph.f90"), "the module compiles")

  ! That the frame is right, and what is allowed.
  call allow("call limno_lend(run, 'gas', 'mass', own)")
  call allow("p => gas(1:5)%mass; call limno_lend(run, 'gas', 'mass', p)")
  call allow("p => fixed(9:1:-2); call limno_lend(run, 'gas', 'mass', p)")
  call allow("call limno_lend_constant(run, 'gas', 'mass', gas(1)%mass, 10)")

  call refuse("call limno_lend(run, 'gas', 'mass', 2*own)")
  call refuse("call limno_lend(run, 'gas', 'mass', (own))")
  call refuse("call limno_lend(run, 'gas', 'mass', [1d0, 2d0])")
  call refuse("call limno_lend(run, 'gas', 'mass', own(list))")
  call refuse("call limno_lend(run, 'gas', 'mass', gas%mass)")
  call refuse("call limno_lend(run, 'gas', 'mass', fixed)")
  call refuse("call limno_lend(run, 'gas', 'mass', own(1:5))")
  call refuse("call limno_lend(run, 'gas', 'velocity', own, own, 2*own)")
  call refuse("call limno_lend(run, 'gas', 'position', reshape(own, [3, 3]))")
  call refuse("call limno_lend_constant(run, 'gas', 'mass', 1d0, 10)")
  call refuse("call limno_lend_constant(run, 'gas', 'mass', no_target, 10)")
  call refuse("p => fixed(list)")
  call refuse("p => gas(list)%mass")
  call refuse("p => own")
  call finish()

contains

  subroutine allow(statements)
    character(len=*), intent(in) :: statements
    call expect(compiles_as_host(statements), "this compiles: "//statements)
  end subroutine allow

  subroutine refuse(statements)
    character(len=*), intent(in) :: statements
    call expect(.not. compiles_as_host(statements), "the compiler refuses this: "//statements)
  end subroutine refuse

  logical function compiles_as_host(statements)
    character(len=*), intent(in) :: statements
    integer :: unit
    open (newunit=unit, file=place("host.f90"), status="replace", action="write")
    write (unit, "(a)") "subroutine host(run)", &
      "  use limnograph", &
      "  implicit none", &
      "  type(limno_run), intent(inout) :: run", &
      "  type :: element", &
      "    double precision :: mass, energy", &
      "  end type element", &
      "  type(element), target, save :: gas(10)", &
      "  double precision, target, save :: fixed(10)", &
      "  double precision, save :: no_target", &
      "  double precision, allocatable, save :: own(:)", &
      "  double precision, pointer :: p(:)", &
      "  integer :: list(2)", &
      "  list = [1, 3]", &
      statements, &
      "end subroutine host"
    close (unit)
    compiles_as_host = compiles(place("host.f90"))
  end function compiles_as_host

  logical function compiles(source)
    character(len=*), intent(in) :: source
    integer :: answer, failure
    call execute_command_line(trim(compiler)//" -fsyntax-only -J"//place("")//" "//source// &
                              " 2>"//place("messages.txt"), exitstat=answer, &
                              cmdstat=failure)
    compiles = failure == 0 .and. answer == 0
  end function compiles
end program what_would_be_gone_is_refused
