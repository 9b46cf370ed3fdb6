#include "demo/normal_numbers.h"

#include <Eigen/Core>
#include <algorithm>
#include <numbers>

namespace bentlight::demo {

namespace {

constexpr std::uint64_t golden = 0x9E3779B97F4A7C15;

std::uint64_t mixed(std::uint64_t z) {
  z = (z ^ (z >> 30)) * 0xBF58476D1CE4E5B9;
  z = (z ^ (z >> 27)) * 0x94D049BB133111EB;
  return z ^ (z >> 31);
}

constexpr std::size_t pairs =
    64;  // a piece: small enough for one frame's waves, large enough for full vectors
using Piece = Eigen::Array<float, 2 * pairs, 1>;
using HalfPiece = Eigen::Array<float, pairs, 1>;

Piece normal_piece(std::uint64_t counter) {
  HalfPiece radius, angle;
  constexpr float step = 1.0F / (1 << 24);
  for (std::size_t i = 0; i < pairs; ++i) {
    const std::uint64_t bits = mixed(counter + i * golden);
    radius[static_cast<Eigen::Index>(i)] =
        static_cast<float>(static_cast<std::int32_t>(bits >> 40) + 1) * step;
    angle[static_cast<Eigen::Index>(i)] =
        static_cast<float>(static_cast<std::int32_t>(bits & 0xFFFFFF)) * step;
  }
  radius = (-2.0F * radius.log()).sqrt();
  angle *= 2.0F * std::numbers::pi_v<float>;
  Piece piece;
  piece.head<pairs>() = radius * angle.cos();
  piece.tail<pairs>() = radius * angle.sin();
  return piece;
}

}  // namespace

NormalNumbers::NormalNumbers(std::uint64_t seed, std::uint64_t stream)
    : base_(mixed(mixed(seed) + stream * golden)) {}

template <class Take>
void NormalNumbers::in_pieces(std::uint64_t row, std::size_t count, const Take& take) const {
  const std::uint64_t row_base = mixed(base_ + row * golden);
  for (std::size_t first = 0; first < count; first += 2 * pairs) {
    take(first, std::min(2 * pairs, count - first), normal_piece(row_base + first * golden));
  }
}

void NormalNumbers::fill(std::uint64_t row, std::span<float> out) const {
  in_pieces(row, out.size(), [&](std::size_t first, std::size_t count, const Piece& piece) {
    std::copy_n(piece.data(), count, out.data() + first);
  });
}

void NormalNumbers::add_to(std::uint64_t row, float scale, std::span<float> values) const {
  in_pieces(row, values.size(), [&](std::size_t first, std::size_t count, const Piece& piece) {
    for (std::size_t i = 0; i < count; ++i) values[first + i] += scale * piece[static_cast<Eigen::Index>(i)];
  });
}

double uniform_number(std::uint64_t seed, std::uint64_t stream, std::uint64_t index) {
  return static_cast<double>(mixed(mixed(mixed(seed) + stream * golden) + index * golden) >> 11) * 0x1.0p-53;
}

}  // namespace bentlight::demo
