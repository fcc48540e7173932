! Euler–Maruyama on dX = mu X dt + sigma X dW.
function euler_path(steps, paths, t, h, params, x, noise, end) bind(c) result(code)
  use iso_c_binding
  integer(c_int64_t), value :: steps, paths
  real(c_double), value :: t, h
  real(c_double), intent(in) :: params(2), x(paths), noise(paths, steps)
  real(c_double), intent(out) :: end(paths)
  integer(c_int) :: code
  integer(c_int64_t) :: k

  end = x
  do k = 1, steps
    end = end + params(1) * end * h + params(2) * end * noise(:, k)
  end do
  code = 0
end function
