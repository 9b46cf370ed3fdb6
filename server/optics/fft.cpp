#include "optics/fft.h"

#include <fftw3.h>

#include <mutex>
#include <stdexcept>
#include <vector>

namespace bentlight::optics {

namespace {

std::mutex& planner() {
  static std::mutex mutex;
  return mutex;
}

fftw_complex* as_fftw(std::complex<double>* values) {
  return reinterpret_cast<fftw_complex*>(values);  // the layouts are the same by FFTW's manual
}

}  // namespace

struct RealFft::Plans {
  fftw_plan forward = nullptr, inverse = nullptr;

  explicit Plans(std::size_t length) {
    // Unaligned plans run on any array of the caller; estimating does not touch the arrays it is shown.
    constexpr unsigned flags = FFTW_ESTIMATE | FFTW_UNALIGNED;
    std::vector<double> values(length);
    std::vector<std::complex<double>> spectrum(length / 2 + 1);
    const int n = static_cast<int>(length);
    const std::scoped_lock lock(planner());
    forward = fftw_plan_dft_r2c_1d(n, values.data(), as_fftw(spectrum.data()), flags | FFTW_PRESERVE_INPUT);
    inverse = fftw_plan_dft_c2r_1d(n, as_fftw(spectrum.data()), values.data(), flags);
  }
  ~Plans() {
    const std::scoped_lock lock(planner());
    fftw_destroy_plan(forward);
    fftw_destroy_plan(inverse);
  }
  Plans(const Plans&) = delete;
  Plans& operator=(const Plans&) = delete;
};

RealFft::RealFft(std::size_t length) : length_(length) {
  if (length == 0) throw std::invalid_argument("RealFft: a length of zero");
  plans_ = std::make_shared<const Plans>(length);
}

void RealFft::forward(std::span<const double> values, std::span<std::complex<double>> spectrum) const {
  if (values.size() != length() || spectrum.size() != bins()) {
    throw std::invalid_argument("RealFft::forward: arrays differ from the plan in length");
  }
  // FFTW takes its input as changeable, and promises here not to change it.
  fftw_execute_dft_r2c(plans_->forward, const_cast<double*>(values.data()), as_fftw(spectrum.data()));
}

void RealFft::inverse(std::span<std::complex<double>> spectrum, std::span<double> values) const {
  if (values.size() != length() || spectrum.size() != bins()) {
    throw std::invalid_argument("RealFft::inverse: arrays differ from the plan in length");
  }
  fftw_execute_dft_c2r(plans_->inverse, as_fftw(spectrum.data()), values.data());
}

}  // namespace bentlight::optics
