! A stress update of the whole material, as an example to start from. Build it with
!
!     gfortran -O2 -shared -fPIC -o routine-f90.so routine.f90
!
! The same material, constants and memory as routine.c; its comments say what is what.
!
! Returns 0; 1 at or below the pole of the shift law; 2 where the constants or the memory have another length than they should.

module viscoelastic_update
    use, intrinsic :: iso_c_binding, only: c_int, c_double
    implicit none
    private
    public :: stress_update

    type, bind(c), public :: increment
        real(c_double) :: time(2), temperature(2), strain(6, 2)
    end type increment

contains

    integer(c_int) function stress_update(step, n_constants, constants, n_memory, memory, memory_end, stress, tangent) &
            bind(c, name="stress_update")
        type(increment), intent(in) :: step
        integer(c_int), value, intent(in) :: n_constants, n_memory
        real(c_double), intent(in) :: constants(n_constants), memory(n_memory)
        real(c_double), intent(inout) :: memory_end(n_memory), stress(6), tangent(6, 6)
        integer :: n_shear, n_bulk, i, j, c, at
        real(c_double) :: G, K, C1, C2, T_ref, alpha, dT, ln_a(2), dxi, r, decay, gain, mechanical, pressure
        real(c_double) :: change(6), deviator(6), deviator_change(6)

        stress_update = 2
        if (n_constants < 8) return
        n_shear = int(constants(3))
        n_bulk = int(constants(4))
        if (n_constants /= 8 + 2 * (n_shear + n_bulk) .or. n_memory /= 1 + n_bulk + 6 * n_shear) return
        at = 4 + 2 * (n_shear + n_bulk)
        C1 = constants(at + 1)
        C2 = constants(at + 2)
        T_ref = constants(at + 3)
        alpha = constants(at + 4)

        ! Reduced time: the logarithmic mean of the rates at the ends.
        stress_update = 1
        do i = 1, 2
            dT = step%temperature(i) - T_ref
            if (.not. C2 + dT > 0.0_c_double) return
            ln_a(i) = -log(10.0_c_double) * C1 * dT / (C2 + dT)
        end do
        dxi = (step%time(2) - step%time(1)) * exp(-min(ln_a(1), ln_a(2))) * gain_of(abs(ln_a(2) - ln_a(1)))

        ! The shear entries are engineering strains, twice the tensor's.
        change = step%strain(:, 2) - step%strain(:, 1)
        deviator = deviatoric(step%strain(:, 2))
        deviator_change = deviatoric(change)

        ! Volume: what is left of the volume strain without thermal expansion.
        mechanical = sum(change(1:3)) - 3.0_c_double * alpha * (step%temperature(2) - step%temperature(1))
        memory_end(1) = memory(1) + mechanical
        K = constants(2)
        pressure = K * memory_end(1)
        do j = 1, n_bulk
            at = 4 + 2 * (n_shear + j) - 1
            r = dxi / constants(at + 1)
            gain = gain_of(r)
            memory_end(1 + j) = exp(-r) * memory(1 + j) + gain * constants(at) * mechanical
            pressure = pressure + memory_end(1 + j)
            K = K + gain * constants(at)
        end do

        ! Shape.
        G = constants(1)
        stress = 2.0_c_double * G * deviator
        stress(1:3) = stress(1:3) + pressure
        do i = 1, n_shear
            at = 4 + 2 * i - 1
            r = dxi / constants(at + 1)
            decay = exp(-r)
            gain = gain_of(r)
            do c = 1, 6
                j = 1 + n_bulk + 6 * (i - 1) + c
                memory_end(j) = decay * memory(j) + 2.0_c_double * gain * constants(at) * deviator_change(c)
                stress(c) = stress(c) + memory_end(j)
            end do
            G = G + gain * constants(at)
        end do

        ! Symmetric, so that row-major and column-major are one.
        tangent = 0.0_c_double
        tangent(1:3, 1:3) = K - 2.0_c_double * G / 3.0_c_double
        do c = 1, 6
            tangent(c, c) = tangent(c, c) + merge(2.0_c_double, 1.0_c_double, c <= 3) * G
        end do
        stress_update = 0
    end function stress_update

    pure function deviatoric(strain) result(deviator)
        real(c_double), intent(in) :: strain(6)
        real(c_double) :: deviator(6)
        deviator(1:3) = strain(1:3) - sum(strain(1:3)) / 3.0_c_double
        deviator(4:6) = 0.5_c_double * strain(4:6)
    end function deviatoric

    ! (1 - exp(-r))/r, which is 1 at r = 0. Fortran has no expm1: with u = exp(-r) rounded, (1 - u)/r is off by the rounding
    ! of u, and (1 - u)/(-log(u)) is not, because numerator and denominator are off alike (Kahan's trick, from memory).
    pure real(c_double) function gain_of(r)
        real(c_double), intent(in) :: r
        real(c_double) :: u
        u = exp(-r)
        if (r <= 0.0_c_double .or. u == 1.0_c_double) then
            gain_of = 1.0_c_double - 0.5_c_double * r
        else if (u < 0.5_c_double) then
            gain_of = (1.0_c_double - u) / r
        else
            gain_of = (1.0_c_double - u) / (-log(u))
        end if
    end function gain_of

end module viscoelastic_update
