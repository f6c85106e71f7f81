! wind_sphere: a Fortran + MPI host. Gas is driven out of a sphere as a wind.
!
! What it shows: how a Fortran code lends its arrays, here a plain (3, n) array and sections of an
! array of derived type, and tallies what no array shows. The gas is real: the equations of gas
! dynamics without gravity are solved on a three-dimensional mesh, which is cut into slabs, one a
! rank (finite volumes; Hancock's predictor with limited slopes; HLLC fluxes; one axis after the
! other). Mass and energy enter evenly inside a sphere, gamma = 5/3, and the flow settles to the
! steady wind of Chevalier & Clegg 1985, Nature 317, 44: outside of the sphere as much mass crosses
! every shell per year as enters inside, here 2 Msun/yr. The gauge wind_shells must find it.
!
! Build, in the top directory, after `make install PREFIX=...`:
!     mpif90 -O3 -o wind_sphere $PREFIX/include/limnograph.f90 ffi-examples/wind_sphere.f90 \
!         -L$PREFIX/lib -Wl,-rpath,$PREFIX/lib -llimnograph_mpi
! Try:
!     mpirun -n 2 ./wind_sphere
!     limnograph sight wind_sphere.limno
!     limnograph export wind_sphere.limno --to csv
! It takes CONFIG, SERIES and the number of cells along a side as arguments, in this order; without
! them ffi-examples/wind_sphere.toml, wind_sphere.limno and 48.

! The problem: what enters, and what is known of the answer. Units: kpc, Msun, km/s.
module source
  use, intrinsic :: iso_fortran_env, only: real64
  implicit none
  public

  real(real64), parameter :: gamma = 5.0_real64/3.0_real64
  real(real64), parameter :: pi = acos(-1.0_real64)
  ! One unit of time, kpc/(km/s), in Julian years; kpc from the IAU's definition of the parsec.
  real(real64), parameter :: year = 365.25_real64*86400.0_real64
  real(real64), parameter :: unit_of_time = 3.0856775814913673e16_real64/year

  real(real64), parameter :: radius = 0.2_real64
  real(real64), parameter :: mass_rate = 2.0_real64*unit_of_time
  real(real64), parameter :: terminal_speed = 1600.0_real64
  real(real64), parameter :: energy_rate = 0.5_real64*mass_rate*terminal_speed**2

  ! At the centre of the steady wind, Chevalier & Clegg 1985: density 0.296 Mdot^3/2 Edot^-1/2 R^-2;
  ! the temperature 0.4 mu m_H Edot/(k Mdot) is an internal energy of 3/2 times 0.4 Edot/Mdot.
  real(real64), parameter :: central_density = 0.2959_real64*mass_rate**1.5_real64 &
                             /sqrt(energy_rate)/radius**2
  real(real64), parameter :: central_internal_energy = 0.6_real64*energy_rate/mass_rate

  ! The thin gas at rest that fills the mesh at first, and that the wind blows away.
  real(real64), parameter :: ambient_density = 0.01_real64*central_density
  real(real64), parameter :: ambient_internal_energy = 0.01_real64*central_internal_energy

contains

  ! How many points of a lattice in a cube lie inside the source. Counts add up to the same total
  ! however the cubes are dealt out, so that the run is the same on any number of ranks.
  pure function points_inside(centre, side) result(inside)
    real(real64), intent(in) :: centre(3), side
    real(real64) :: point(3)
    integer, parameter :: points = 10
    integer :: i, j, k, inside
    inside = 0
    if (norm2(centre) > radius + side) return
    do k = 1, points
      do j = 1, points
        do i = 1, points
          point = centre + side*((real([i, j, k], real64) - 0.5_real64)/points - 0.5_real64)
          if (sum(point**2) < radius**2) inside = inside + 1
        end do
      end do
    end do
  end function points_inside
end module source

! Gas on a line of cells, one step of gas dynamics along it.
module line
  use, intrinsic :: iso_fortran_env, only: real64
  use source, only: gamma
  implicit none
  private
  public :: advance_line

  ! What is kept of a cell: density, velocity along the line and across it, pressure.
  integer, parameter, public :: density = 1, along = 2, across_1 = 3, across_2 = 4, pressure = 5

contains

  ! Advances cells 1 to n of a line by `ratio` = time over side; two more cells stand at either end.
  pure subroutine advance_line(n, gas, ratio)
    integer, intent(in) :: n
    real(real64), intent(inout) :: gas(5, -1:n + 2)
    real(real64), intent(in) :: ratio
    real(real64) :: left(5, 0:n + 1), right(5, 0:n + 1), flux(5, 0:n), whole(5)
    integer :: i
    do i = 0, n + 1
      call predict(gas(:, i - 1), gas(:, i), gas(:, i + 1), ratio, left(:, i), right(:, i))
    end do
    do i = 0, n
      call find_flux(right(:, i), left(:, i + 1), flux(:, i))
    end do
    do i = 1, n
      whole = conserved(gas(:, i)) - ratio*(flux(:, i) - flux(:, i - 1))
      gas(density, i) = whole(density)
      gas(along:across_2, i) = whole(along:across_2)/whole(density)
      gas(pressure, i) = (gamma - 1)*(whole(pressure) - 0.5_real64*sum(whole(along:across_2)**2) &
                                      /whole(density))
      ! Behind strong shocks the difference of two energies may come out below nothing.
      gas(pressure, i) = max(gas(pressure, i), 1e-10_real64*whole(pressure))
    end do
  end subroutine advance_line

  ! The gas at both sides of a cell half a step later, from slopes that make no new extremes.
  pure subroutine predict(before, here, after, ratio, left, right)
    real(real64), intent(in) :: before(5), here(5), after(5), ratio
    real(real64), intent(out) :: left(5), right(5)
    real(real64) :: slope(5), change(5), back, ahead
    integer :: i
    do i = 1, 5
      back = here(i) - before(i)
      ahead = after(i) - here(i)
      ! Twice the smaller of the one-sided slopes, or the central one if that is smaller still.
      slope(i) = 0.0_real64
      if (back*ahead > 0.0_real64) slope(i) = sign(min(2*abs(back), 2*abs(ahead), &
                                                       0.5_real64*abs(back + ahead)), back)
    end do
    change = here(along)*slope
    change(density) = change(density) + here(density)*slope(along)
    change(along) = change(along) + slope(pressure)/here(density)
    change(pressure) = change(pressure) + gamma*here(pressure)*slope(along)
    left = here - 0.5_real64*(ratio*change + slope)
    right = here - 0.5_real64*(ratio*change - slope)
    if (min(left(density), right(density), left(pressure), right(pressure)) <= 0.0_real64) then
      left = here
      right = here
    end if
  end subroutine predict

  pure function conserved(gas) result(whole)
    real(real64), intent(in) :: gas(5)
    real(real64) :: whole(5)
    whole(density) = gas(density)
    whole(along:across_2) = gas(density)*gas(along:across_2)
    whole(pressure) = gas(pressure)/(gamma - 1) &
                      + 0.5_real64*gas(density)*sum(gas(along:across_2)**2)
  end function conserved

  ! HLLC: Toro, Spruce & Speares 1994, Shock Waves 4, 25; wave speeds after Davis 1988.
  pure subroutine find_flux(left, right, flux)
    real(real64), intent(in) :: left(5), right(5)
    real(real64), intent(out) :: flux(5)
    real(real64) :: sound_left, sound_right, slowest, fastest, push_left, push_right, middle
    sound_left = sqrt(gamma*left(pressure)/left(density))
    sound_right = sqrt(gamma*right(pressure)/right(density))
    slowest = min(left(along) - sound_left, right(along) - sound_right)
    fastest = max(left(along) + sound_left, right(along) + sound_right)
    push_left = left(density)*(slowest - left(along))
    push_right = right(density)*(fastest - right(along))
    middle = (right(pressure) - left(pressure) + left(along)*push_left - right(along)*push_right) &
             /(push_left - push_right)
    if (middle >= 0.0_real64) then
      call flux_of_side(left, slowest, middle, push_left, slowest >= 0.0_real64, flux)
    else
      call flux_of_side(right, fastest, middle, push_right, fastest <= 0.0_real64, flux)
    end if
  end subroutine find_flux

  pure subroutine flux_of_side(gas, speed, middle, push, is_undisturbed, flux)
    real(real64), intent(in) :: gas(5), speed, middle, push
    logical, intent(in) :: is_undisturbed
    real(real64), intent(out) :: flux(5)
    real(real64) :: whole(5), star(5), density_star
    whole = conserved(gas)
    flux = gas(along)*whole
    flux(along) = flux(along) + gas(pressure)
    flux(pressure) = flux(pressure) + gas(along)*gas(pressure)
    if (is_undisturbed) return
    density_star = push/(speed - middle)
    star(density) = density_star
    star(along) = density_star*middle
    star(across_1:across_2) = density_star*gas(across_1:across_2)
    star(pressure) = density_star*(whole(pressure)/gas(density) &
                                   + (middle - gas(along))*(middle + gas(pressure)/push))
    flux = flux + speed*(star - whole)
  end subroutine flux_of_side
end module line

! The mesh: a cube around the source, cut into slabs along z, one a rank.
module mesh
  use, intrinsic :: iso_fortran_env, only: real64
  use mpi
  use line
  use source
  implicit none
  private
  public :: build_mesh, inject, advance_mesh, longest_step

  ! A cell's gas, in the form in which it is lent.
  type, public :: gas_cell
    real(real64) :: velocity(3)
    real(real64) :: mass
    real(real64) :: internal_energy
  end type gas_cell

  ! Half a side of the cube.
  real(real64), parameter :: reach = 4*radius

  integer :: n, planes, below, above
  real(real64) :: side, cell_volume
  ! All planes of the slab with two of either neighbour, and the same cells as a mesh.
  type(gas_cell), allocatable, target :: storage(:)
  type(gas_cell), pointer, contiguous :: grid(:, :, :)

  ! The cells of this rank, and where their centres are.
  type(gas_cell), pointer, public :: own(:)
  real(real64), allocatable, target, public :: position(:, :)
  ! Numbers of the cells that the source reaches, and the share of the source that is in each.
  integer, allocatable, public :: source_cells(:)
  real(real64), allocatable, public :: source_shares(:)

contains

  subroutine build_mesh(cells, rank, ranks)
    integer, intent(in) :: cells, rank, ranks
    integer, allocatable :: inside(:)
    integer :: total, first, i, j, k, at, error

    n = cells
    first = rank*n/ranks
    planes = (rank + 1)*n/ranks - first
    below = merge(rank - 1, MPI_PROC_NULL, rank > 0)
    above = merge(rank + 1, MPI_PROC_NULL, rank + 1 < ranks)
    side = 2*reach/n
    cell_volume = side**3

    allocate (storage(n*n*(planes + 4)), position(3, n*n*planes), inside(n*n*planes))
    grid(1:n, 1:n, -1:planes + 2) => storage
    own => storage(2*n*n + 1:n*n*(planes + 2))
    storage = gas_cell([0.0_real64, 0.0_real64, 0.0_real64], ambient_density*cell_volume, &
                       ambient_internal_energy)
    at = 0
    do k = 1, planes
      do j = 1, n
        do i = 1, n
          at = at + 1
          position(:, at) = side*(real([i, j, first + k], real64) - 0.5_real64) - reach
          inside(at) = points_inside(position(:, at), side)
        end do
      end do
    end do

    call MPI_Allreduce(sum(inside), total, 1, MPI_INTEGER, MPI_SUM, MPI_COMM_WORLD, error)
    source_cells = pack([(at, at=1, size(inside))], inside > 0)
    source_shares = real(inside(source_cells), real64)/total
  end subroutine build_mesh

  ! Adds mass and energy, at rest, to the cells of the source.
  subroutine inject(mass, energy)
    real(real64), intent(in) :: mass(:), energy(:)
    real(real64) :: whole, total
    integer :: i
    do i = 1, size(source_cells)
      associate (cell => own(source_cells(i)))
        total = cell%mass*(cell%internal_energy + 0.5_real64*sum(cell%velocity**2)) + energy(i)
        whole = cell%mass + mass(i)
        cell%velocity = cell%velocity*(cell%mass/whole)
        cell%mass = whole
        cell%internal_energy = total/whole - 0.5_real64*sum(cell%velocity**2)
      end associate
    end do
  end subroutine inject

  ! The longest time step over which no wave crosses half a cell. The source heats gas within a
  ! step: waves may become faster than they are now, but hardly than the wind.
  function longest_step() result(step)
    real(real64) :: step, fastest, speed
    integer :: i, error
    fastest = terminal_speed
    do i = 1, size(own)
      speed = maxval(abs(own(i)%velocity)) + sqrt(gamma*(gamma - 1)*own(i)%internal_energy)
      fastest = max(fastest, speed)
    end do
    call MPI_Allreduce(0.5_real64*side/fastest, step, 1, MPI_DOUBLE_PRECISION, MPI_MIN, &
                       MPI_COMM_WORLD, error)
  end function longest_step

  ! Advances all gas by a time step, one axis after the other, and the other way round next time.
  subroutine advance_mesh(step, is_even)
    real(real64), intent(in) :: step
    logical, intent(in) :: is_even
    integer :: axis
    do axis = 1, 3
      call advance_axis(merge(axis, 4 - axis, is_even), step/side)
    end do
  end subroutine advance_mesh

  subroutine advance_axis(axis, ratio)
    integer, intent(in) :: axis
    real(real64), intent(in) :: ratio
    real(real64) :: gas(5, -1:max(n, planes) + 2)
    integer :: i, j, k
    select case (axis)
    case (1)
      do k = 1, planes
        do j = 1, n
          call read_line(grid(:, j, k), 1, gas(:, 1:n))
          call leave_open(gas(:, -1:n + 2))
          call advance_line(n, gas, ratio)
          call write_line(gas(:, 1:n), 1, grid(:, j, k))
        end do
      end do
    case (2)
      do k = 1, planes
        do i = 1, n
          call read_line(grid(i, :, k), 2, gas(:, 1:n))
          call leave_open(gas(:, -1:n + 2))
          call advance_line(n, gas, ratio)
          call write_line(gas(:, 1:n), 2, grid(i, :, k))
        end do
      end do
    case (3)
      call meet_neighbours()
      do j = 1, n
        do i = 1, n
          call read_line(grid(i, j, :), 3, gas(:, -1:planes + 2))
          call advance_line(planes, gas, ratio)
          call write_line(gas(:, 1:planes), 3, grid(i, j, 1:planes))
        end do
      end do
    end select
  end subroutine advance_axis

  ! What leaves the mesh is gone: beyond its faces the gas is as it is at them.
  pure subroutine leave_open(gas)
    real(real64), intent(inout) :: gas(:, :)
    integer :: last
    last = size(gas, 2)
    gas(:, 1) = gas(:, 3)
    gas(:, 2) = gas(:, 3)
    gas(:, last - 1) = gas(:, last - 2)
    gas(:, last) = gas(:, last - 2)
  end subroutine leave_open

  pure subroutine read_line(cells, axis, gas)
    type(gas_cell), intent(in) :: cells(:)
    integer, intent(in) :: axis
    real(real64), intent(out) :: gas(:, :)
    integer :: i, next, last
    next = mod(axis, 3) + 1
    last = mod(next, 3) + 1
    do i = 1, size(cells)
      gas(density, i) = cells(i)%mass/cell_volume
      gas(along:across_2, i) = cells(i)%velocity([axis, next, last])
      gas(pressure, i) = (gamma - 1)*gas(density, i)*cells(i)%internal_energy
    end do
  end subroutine read_line

  pure subroutine write_line(gas, axis, cells)
    real(real64), intent(in) :: gas(:, :)
    integer, intent(in) :: axis
    type(gas_cell), intent(inout) :: cells(:)
    integer :: i, next, last
    next = mod(axis, 3) + 1
    last = mod(next, 3) + 1
    do i = 1, size(cells)
      cells(i)%mass = gas(density, i)*cell_volume
      cells(i)%velocity([axis, next, last]) = gas(along:across_2, i)
      cells(i)%internal_energy = gas(pressure, i)/((gamma - 1)*gas(density, i))
    end do
  end subroutine write_line

  ! Fills the planes beyond the slab: from the neighbour, or where there is none as the face is.
  subroutine meet_neighbours()
    call pass_on(grid(:, :, planes - 1:planes), above, grid(:, :, [1, 1]), below, &
                 grid(:, :, -1:0))
    call pass_on(grid(:, :, 1:2), below, grid(:, :, [planes, planes]), above, &
                 grid(:, :, planes + 1:planes + 2))
  end subroutine meet_neighbours

  ! Gives two planes to one neighbour and takes two from the other, if there is one.
  subroutine pass_on(given, to, if_none, from, taken)
    type(gas_cell), intent(in) :: given(:, :, :), if_none(:, :, :)
    integer, intent(in) :: to, from
    type(gas_cell), intent(inout) :: taken(:, :, :)
    real(real64) :: out(5, n, n, 2), in(5, n, n, 2)
    integer :: error
    call to_numbers(given, out)
    call to_numbers(if_none, in)
    call MPI_Sendrecv(out, size(out), MPI_DOUBLE_PRECISION, to, 1, in, size(in), &
                      MPI_DOUBLE_PRECISION, from, 1, MPI_COMM_WORLD, MPI_STATUS_IGNORE, error)
    call from_numbers(in, taken)
  end subroutine pass_on

  pure subroutine to_numbers(cells, numbers)
    type(gas_cell), intent(in) :: cells(:, :, :)
    real(real64), intent(out) :: numbers(:, :, :, :)
    integer :: axis
    do axis = 1, 3
      numbers(axis, :, :, :) = cells%velocity(axis)
    end do
    numbers(4, :, :, :) = cells%mass
    numbers(5, :, :, :) = cells%internal_energy
  end subroutine to_numbers

  pure subroutine from_numbers(numbers, cells)
    real(real64), intent(in) :: numbers(:, :, :, :)
    type(gas_cell), intent(inout) :: cells(:, :, :)
    integer :: axis
    do axis = 1, 3
      cells%velocity(axis) = numbers(axis, :, :, :)
    end do
    cells%mass = numbers(4, :, :, :)
    cells%internal_energy = numbers(5, :, :, :)
  end subroutine from_numbers
end module mesh

program wind_sphere
  use, intrinsic :: iso_fortran_env, only: int64, real64
  use limnograph
  use mesh
  use mpi
  use source
  implicit none

  ! The wind fills the mesh in about 5 R over the terminal speed; after this many it is steady.
  real(real64), parameter :: end_time = 16*radius/terminal_speed

  type(limno_run) :: run
  type(limno_clock) :: clock
  character(len=1000) :: config, series
  integer :: cells, rank, ranks, error, status

  call MPI_Init(error)
  call MPI_Comm_rank(MPI_COMM_WORLD, rank, error)
  call MPI_Comm_size(MPI_COMM_WORLD, ranks, error)
  call read_arguments()
  call build_mesh(cells, rank, ranks)

  call limno_open(config, series, MPI_COMM_WORLD, run, host_name="wind_sphere", status=status)
  if (status /= LIMNO_OK) then
    if (rank == 0) print "(a)", limno_last_error(run)
    call MPI_Finalize(error)
    stop 1
  end if

  clock = limno_clock(step=0, time=0.0_real64)
  call measure()
  do while (clock%time < end_time)
    clock%step = clock%step + 1
    clock%step_length = min(longest_step(), end_time - clock%time)
    call blow(0.5_real64*clock%step_length)
    call advance_mesh(clock%step_length, mod(clock%step, 2_int64) == 0)
    call blow(0.5_real64*clock%step_length)
    clock%time = clock%time + clock%step_length
    if (end_time - clock%time < 1e-9_real64*end_time) clock%time = end_time
    call measure()
    if (mod(clock%step, 50_int64) == 0 .or. clock%time >= end_time) call report()
  end do

  call limno_close(run, status)
  if (status /= LIMNO_OK .and. rank == 0) print "(a)", limno_last_error(run)
  call MPI_Finalize(error)

contains

  ! One measured step: the clock, the arrays where they stand, and the end of the step.
  subroutine measure()
    real(real64), pointer :: vx(:), vy(:), vz(:), mass(:), internal_energy(:)
    vx => own%velocity(1)
    vy => own%velocity(2)
    vz => own%velocity(3)
    mass => own%mass
    internal_energy => own%internal_energy
    call limno_mark(run, clock)
    call limno_lend(run, "gas", "position", position)
    call limno_lend(run, "gas", "velocity", vx, vy, vz)
    call limno_lend(run, "gas", "mass", mass)
    call limno_lend(run, "gas", "internal_energy", internal_energy)
    call limno_enter(run, status)
    if (status /= LIMNO_OK .and. rank == 0) print "(a)", limno_last_error(run)
  end subroutine measure

  ! The source at work for some time: every cell that it reaches gets its share, which is tallied.
  subroutine blow(time)
    real(real64), intent(in) :: time
    call inject(mass_rate*time*source_shares, energy_rate*time*source_shares)
    call limno_tally(run, "wind", mass=mass_rate*time*source_shares, &
                     energy=energy_rate*time*source_shares, position=position(:, source_cells))
  end subroutine blow

  ! How the innermost gas compares with the steady wind.
  subroutine report()
    real(real64) :: mine(3), all(3)
    logical :: is_central(size(own))
    is_central = sum(position**2, 1) < (0.25_real64*radius)**2
    mine = [sum(own%mass, is_central), sum(own%mass*own%internal_energy, is_central), &
            real(count(is_central), real64)]
    call MPI_Reduce(mine, all, 3, MPI_DOUBLE_PRECISION, MPI_SUM, 0, MPI_COMM_WORLD, error)
    if (rank == 0) print "(a, i5, a, f5.1, a, f6.3, a, f6.3)", "step", clock%step, "   time", &
      clock%time*terminal_speed/radius, " R/v   central density", &
      all(1)/all(3)/cell_volume()/central_density, ", temperature", &
      all(2)/all(1)/central_internal_energy
  end subroutine report

  function cell_volume() result(volume)
    real(real64) :: volume
    volume = (position(1, 2) - position(1, 1))**3
  end function cell_volume

  subroutine read_arguments()
    character(len=20) :: number
    config = "ffi-examples/wind_sphere.toml"
    series = "wind_sphere.limno"
    cells = 48
    if (command_argument_count() > 0) call get_command_argument(1, config)
    if (command_argument_count() > 1) call get_command_argument(2, series)
    if (command_argument_count() > 2) then
      call get_command_argument(3, number)
      read (number, *, iostat=status) cells
      if (status /= 0) cells = 0
    end if
    if (cells < 2*ranks .or. cells < 16) then
      if (rank == 0) print "(a)", "wind_sphere: the number of cells along a side must be at "// &
        "least 16, and twice the number of ranks"
      call MPI_Finalize(error)
      stop 1
    end if
  end subroutine read_arguments
end program wind_sphere
