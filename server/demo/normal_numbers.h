// Random numbers for the demo archive: a pure function of the place where each is used.
#pragma once

#include <cstdint>
#include <span>

namespace bentlight::demo {

/// Standard normal numbers in rows of any length. A row depends on seed, stream and row number alone, so that
/// views are written by any number of threads and in any order with the same outcome.
///
///   source   SplitMix64 (Steele, Lea & Flood, OOPSLA 2014) on a counter; Box & Muller, Ann. Math. Statist.
///   29 (1958)
///            610, on 24-bit uniforms, which ends the tails at 5.77
class NormalNumbers {
 public:
  NormalNumbers(std::uint64_t seed, std::uint64_t stream);

  /// The first out.size() numbers of a row.
  void fill(std::uint64_t row, std::span<float> out) const;

  /// Adds `scale` times the row's numbers to `values`.
  void add_to(std::uint64_t row, float scale, std::span<float> values) const;

 private:
  template <class Take>
  void in_pieces(std::uint64_t row, std::size_t count, const Take& take) const;

  std::uint64_t base_;
};

/// A number in [0, 1) for each index, for laws of the scenario that need a few.
double uniform_number(std::uint64_t seed, std::uint64_t stream, std::uint64_t index);

}  // namespace bentlight::demo
