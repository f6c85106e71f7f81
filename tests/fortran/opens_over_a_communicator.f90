! A run is opened over the integer of `use mpi` or comm%MPI_VAL of `use mpi_f08`, over all processes
! or some, and every process gets the same answer, also when it is an error.
! ranks: 1 2 3
include "support/checks.f90"

program opens_over_a_communicator
  use checks
  use mpi_f08
  implicit none

  type(MPI_Comm) :: half, null
  type(limno_run) :: run, small
  type(limno_standing) :: standing
  real(real64), allocatable, target :: mass(:)
  character(len=1) :: number
  integer :: world, rank, status, error

  call MPI_Init()
  call MPI_Comm_rank(MPI_COMM_WORLD, rank)
  world = MPI_COMM_WORLD%MPI_VAL
  allocate (mass(rank))
  mass = 1.0_real64

  call limno_open("wrong.toml", place("wrong.limno"), world, run, status=status, &
                  config_text=plain_config//"[imf]"//newline//"name = 'salty'"//newline)
  call expect_status(run, status, LIMNO_BAD_CONFIG, "a wrong config on every rank", "salty")

  ! Only what rank 0 says counts.
  if (rank == 0) then
    call limno_open("inline", place("all.limno"), world, run, status=status, &
                    config_text=plain_config)
  else
    call limno_open("", "", world, run, status=status)
  end if
  call expect_status(run, status, LIMNO_OK, "opening over all processes")

  call MPI_Comm_split(MPI_COMM_WORLD, mod(rank, 2), rank, half)
  write (number, "(i1)") mod(rank, 2)
  call limno_open("inline", place("half_"//number//".limno"), half%MPI_VAL, small, status=status, &
                  config_text=plain_config, host_name="half")
  call expect_status(small, status, LIMNO_OK, "opening over some processes")
  call MPI_Comm_free(half)

  call step(run)
  call step(small)
  call limno_close(run, status)
  call expect_status(run, status, LIMNO_OK, "closing the run of all")
  call limno_close(small, status)
  call expect_status(small, status, LIMNO_OK, "closing the run of some")

  null = MPI_COMM_NULL
  call limno_open("inline", place("null.limno"), null%MPI_VAL, run, status=status, &
                  config_text=plain_config)
  call expect_status(run, status, LIMNO_BAD_MPI, "the null communicator")

  call MPI_Finalize(error)
  call finish()

contains

  subroutine step(run)
    type(limno_run), intent(inout) :: run
    call limno_mark(run, limno_clock(step=1, time=1.0_real64, checkpoint=.true.), status)
    call expect_status(run, status, LIMNO_OK, "marking a checkpoint")
    call limno_lend(run, "gas", "mass", mass, status)
    call expect_status(run, status, LIMNO_OK, "lending as many elements as the rank's number")
    call limno_enter(run, status)
    call expect_status(run, status, LIMNO_OK, "entering a checkpoint")
    call limno_how_it_stands(run, standing, status)
    call expect(standing%rows == 1, "one row was entered")
  end subroutine step
end program opens_over_a_communicator
