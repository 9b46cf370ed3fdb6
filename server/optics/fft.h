// Fourier transforms of real series. FFTW's planner is global to the program: it is locked here, and nobody
// else calls it.
#pragma once

#include <complex>
#include <cstddef>
#include <memory>
#include <span>

namespace bentlight::optics {

/// Forward and inverse transform of one length, in double, planned once.
///
///   threads  const afterwards: any thread, each with arrays of its own
///   source   FFTW (Frigo and Johnson, Proc. IEEE 93 (2005) 216); plans are estimated, not measured, so that
///            the same question gives the same bits on every run
class RealFft {
 public:
  explicit RealFft(std::size_t length);

  std::size_t length() const { return length_; }
  std::size_t bins() const { return length_ / 2 + 1; }

  /// Bin k is the sum over t of values[t] exp(-2 pi i k t / length). values [length], spectrum [bins]
  void forward(std::span<const double> values, std::span<std::complex<double>> spectrum) const;

  /// The inverse times `length`; destroys `spectrum`.
  void inverse(std::span<std::complex<double>> spectrum, std::span<double> values) const;

 private:
  struct Plans;
  std::size_t length_;
  std::shared_ptr<const Plans> plans_;
};

}  // namespace bentlight::optics
