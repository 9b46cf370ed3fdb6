// Every limit of the program, with the reason for its number.
#pragma once

#include <chrono>
#include <cstddef>
#include <cstdint>

namespace bentlight::limits {

inline constexpr std::size_t kibi = 1024;
inline constexpr std::size_t mebi = 1024 * kibi;
inline constexpr std::size_t gibi = 1024 * mebi;

// Wavefront files. A grid of 4096 x 4096 is beyond any sensor or mesh of the trade, and its frame (64 MiB) still
// fits a piece; 2^40 frames would overflow no product of 64 bits.
inline constexpr std::uint64_t grid_points = 4096 * 4096;
inline constexpr std::uint64_t frames = std::uint64_t{1} << 40;
inline constexpr std::uint64_t chunks = 4'000'000;          // 64 MiB of chunk table; the probe holds some copies
inline constexpr std::uint64_t chunk_bytes = 256 * mebi;    // decoded; a worker holds one
inline constexpr std::size_t attribute_text_bytes = 64 * kibi;
inline constexpr std::size_t signals = 256;
inline constexpr std::uint64_t time_stamps = 16'000'000;    // 128 MiB of doubles, likewise
inline constexpr std::size_t filters = 8;                   // of one pipeline; three are known

// The probe: a foreign file's parser gets this much and no more.
inline constexpr std::size_t probe_memory_bytes = 1 * gibi;
inline constexpr std::chrono::seconds probe_seconds{60};
inline constexpr std::size_t probe_reply_bytes = 384 * mebi;  // the longest chunk table, times and signals
inline constexpr std::size_t tree_objects = 10'000;           // described to a person
inline constexpr std::size_t tree_depth = 32;

// Reading. 256 KiB stay inside a core's second-level cache: pieces of 4 MiB read 25 % slower (tests/bench, read).
inline constexpr std::size_t read_piece_bytes = 256 * kibi;

// Questions.
inline constexpr std::size_t question_memory_bytes = 384 * mebi;  // resident, beyond the program itself
inline constexpr std::uint64_t interactive_bytes = 1 * gibi;      // decoded frames that may be read while one waits
inline constexpr std::size_t result_bytes = 1 * gibi;             // one result, encoded or not
inline constexpr std::size_t queued_questions = 256;
inline constexpr std::size_t parameter_bytes = 1024;
inline constexpr std::size_t parameters = 64;
inline constexpr std::size_t page_items = 500;

// Summaries: modes whose coefficients are kept (Zernike orders 0 to 7), frames to a block of maps.
inline constexpr std::size_t summary_modes = 36;
inline constexpr std::size_t summary_block_frames = 128;

// Indexing goes over a view's frames twice, and keeps them in memory in between as far as this goes: a view of 20,000
// frames of 128 x 128 points is read and inflated once.
inline constexpr std::size_t index_memory_bytes = 1 * gibi;

// The modes of a summary on their points. All 36 fit up to 1000 x 1000 points; a larger grid keeps fewer.
inline constexpr std::size_t summary_basis_bytes = 512 * mebi;

}  // namespace bentlight::limits
