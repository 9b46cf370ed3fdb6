// Text with many numbers in it, at the speed of std::to_chars.
#pragma once

#include <algorithm>
#include <charconv>
#include <string>
#include <string_view>

namespace bentlight::query {

/// Collects text. Numbers take the shortest form that reads back to the same double, or to the same float:
/// a float widened to double would print nine digits of noise.
class TextWriter {
 public:
  void text(std::string_view piece) {
    make_room(piece.size());
    std::copy(piece.begin(), piece.end(), text_.begin() + static_cast<std::ptrdiff_t>(size_));
    size_ += piece.size();
  }

  void letter(char c) {
    make_room(1);
    text_[size_++] = c;
  }

  /// `value` must be finite: neither JSON nor CSV has a word for the rest. Zero has no sign, for a reader
  /// that takes
  /// "-0" for a whole number drops it anyway.
  template <class Number>
  void number(Number value) {
    make_room(longest_number);
    if (value == Number{0}) value = Number{0};
    char* const begin = text_.data() + size_;
    size_ += static_cast<std::size_t>(std::to_chars(begin, begin + longest_number, value).ptr - begin);
  }

  std::string take() {
    text_.resize(size_);
    size_ = 0;
    return std::move(text_);
  }

 private:
  static constexpr std::size_t longest_number = 32;

  void make_room(std::size_t bytes) {
    if (text_.size() - size_ < bytes) text_.resize(std::max(2 * text_.size(), size_ + bytes + 4096));
  }

  std::string text_;  // longer than what is written
  std::size_t size_ = 0;
};

}  // namespace bentlight::query
