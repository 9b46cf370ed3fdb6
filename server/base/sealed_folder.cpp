#include "base/sealed_folder.h"

#include <fmt/format.h>

#include <algorithm>
#include <charconv>
#include <optional>
#include <stdexcept>

#include "base/digest.h"
#include "base/limits.h"
#include "base/text.h"

namespace bentlight {

namespace {

constexpr std::string_view manifest_name = "manifest.txt";
constexpr std::string_view kind = "bentlight sealed folder ";
constexpr long long version = 1;
constexpr std::size_t manifest_bytes = 64 * limits::mebi;

/// Checksums of the pieces of a file, read piece by piece.
Expected<std::vector<std::uint64_t>> piece_sums(const ReadFile& file, std::uint64_t bytes) {
  std::vector<std::uint64_t> sums;
  std::vector<std::byte> piece(sealed_piece_bytes);
  for (std::uint64_t offset = 0; offset < bytes; offset += sealed_piece_bytes) {
    const auto part = std::span(piece).first(
        static_cast<std::size_t>(std::min<std::uint64_t>(sealed_piece_bytes, bytes - offset)));
    if (auto read = file.read_at(offset, part); !read) return failure(read);
    sums.push_back(checksum(part));
  }
  return sums;
}

template <class Number>
std::optional<Number> parsed(std::string_view text, int base) {
  Number value{};
  const auto [end, error] = std::from_chars(text.data(), text.data() + text.size(), value, base);
  if (error != std::errc() || end != text.data() + text.size()) return std::nullopt;
  return value;
}

/// One line of a manifest.
struct Entry {
  std::string name;
  std::uint64_t bytes = 0;
  std::vector<std::uint64_t> pieces;
};

std::optional<Entry> parse_entry(std::string_view line) {
  const auto words = split(line, ' ');
  const auto bytes = words.size() < 2 ? std::nullopt : parsed<std::uint64_t>(words[1], 10);
  if (!bytes) return std::nullopt;
  Entry entry{.name = words[0], .bytes = *bytes};
  for (std::size_t w = 2; w < words.size(); ++w) {
    const auto sum = parsed<std::uint64_t>(words[w], 16);
    if (!sum) return std::nullopt;
    entry.pieces.push_back(*sum);
  }
  if (entry.pieces.size() != (entry.bytes + sealed_piece_bytes - 1) / sealed_piece_bytes) return std::nullopt;
  return entry;
}

}  // namespace

// The manifest is text, one file a line: name, bytes, and the checksums of its pieces in hexadecimal. Its
// last line holds the checksum of all lines above.
Expected<void> SealedFolderWriter::seal() const {
  std::vector<std::string> names;
  std::error_code error;
  for (const auto& entry : std::filesystem::directory_iterator(folder_, error)) {
    names.push_back(entry.path().filename().string());
  }
  if (error) return system_failure(error.value(), "reading the folder", folder_.string());
  std::ranges::sort(names);
  std::string manifest = fmt::format("{}{}\n", kind, version);
  for (const std::string& name : names) {
    if (name.find_first_of(" \n") != std::string::npos) {
      throw std::invalid_argument("SealedFolderWriter: a manifest cannot hold the name " + name);
    }
    const auto file = files_.open(folder_ / name);
    if (!file) return failure(file);
    const auto stamp = (*file)->stamp();
    if (!stamp) return failure(stamp);
    const auto sums = piece_sums(**file, stamp->size_bytes);
    if (!sums) return failure(sums);
    manifest += fmt::format("{} {}", name, stamp->size_bytes);
    for (const std::uint64_t sum : *sums) manifest += fmt::format(" {:x}", sum);
    manifest += '\n';
  }
  manifest += fmt::format("{:x}\n", checksum(as_bytes(manifest)));
  return files_.create(folder_ / manifest_name, as_bytes(manifest));
}

tl::unexpected<Error> SealedFolder::damaged(const std::string& name, std::string_view why) const {
  return failure(ErrorCode::damaged_state, fmt::format("{}: {}; index the view anew", name, why),
                 folder_.filename().string());
}

Expected<std::vector<std::string>> SealedFolder::manifest_lines(const FileSystem& files) const {
  const std::string manifest(manifest_name);
  const auto text = read_whole(files, folder_ / manifest, manifest_bytes);
  if (!text) return damaged(manifest, text.error().text);
  auto lines = split(*text, '\n');
  const auto made_by =
      lines.front().starts_with(kind) ? parse_whole_number(lines.front().substr(kind.size())) : std::nullopt;
  if (made_by && *made_by > version) {
    return failure(ErrorCode::newer_state,
                   fmt::format("{} has version {}, this program knows {}; use the newer program", manifest,
                               *made_by, version),
                   folder_.filename().string());
  }
  if (made_by != version || lines.size() < 3) return damaged(manifest, "not a manifest, or torn");
  const std::string& sum = lines[lines.size() - 2];
  const std::size_t above = text->size() - sum.size() - 1;
  if (sum != fmt::format("{:x}", checksum(as_bytes(std::string_view(*text).substr(0, above))))) {
    return damaged(manifest, "altered or torn");
  }
  return std::vector(lines.begin() + 1, lines.end() - 2);
}

Expected<std::shared_ptr<const SealedFolder>> SealedFolder::open(const FileSystem& files,
                                                                 const std::filesystem::path& folder) {
  const std::shared_ptr<SealedFolder> sealed(new SealedFolder(folder));
  const auto lines = sealed->manifest_lines(files);
  if (!lines) return failure(lines);
  for (const std::string& line : *lines) {
    auto entry = parse_entry(line);
    if (!entry) return sealed->damaged(std::string(manifest_name), "a line that cannot be understood");
    auto file = files.open(folder / entry->name);
    if (!file) return sealed->damaged(entry->name, file.error().text);
    const auto stamp = (*file)->stamp();
    if (!stamp || stamp->size_bytes != entry->bytes) {
      return sealed->damaged(entry->name, "of another size than when it was sealed");
    }
    sealed->files_.emplace(std::move(entry->name),
                           File{std::move(*file), entry->bytes, std::move(entry->pieces)});
  }
  return sealed;
}

Expected<std::uint64_t> SealedFolder::size(const std::string& name) const {
  const auto found = files_.find(name);
  if (found == files_.end()) return damaged(name, "missing");
  return found->second.bytes;
}

Expected<void> SealedFolder::read(const std::string& name,
                                  std::uint64_t offset,
                                  std::span<std::byte> out) const {
  const auto found = files_.find(name);
  if (found == files_.end()) return damaged(name, "missing");
  const File& file = found->second;
  if (offset > file.bytes || out.size() > file.bytes - offset) return damaged(name, "shorter than expected");
  std::vector<std::byte> piece;
  while (!out.empty()) {
    const std::uint64_t number = offset / sealed_piece_bytes, start = number * sealed_piece_bytes;
    piece.resize(static_cast<std::size_t>(std::min<std::uint64_t>(sealed_piece_bytes, file.bytes - start)));
    if (auto read = file.file->read_at(start, piece); !read) {
      return read.error().code == ErrorCode::file_changed ? damaged(name, "cut short") : read;
    }
    if (checksum(piece) != file.pieces[number]) return damaged(name, "altered or torn");
    const auto from = static_cast<std::size_t>(offset - start);
    const std::size_t count = std::min(out.size(), piece.size() - from);
    std::copy_n(piece.begin() + static_cast<std::ptrdiff_t>(from), count, out.begin());
    out = out.subspan(count);
    offset += count;
  }
  return {};
}

Expected<std::vector<std::byte>> SealedFolder::read_all(const std::string& name) const {
  const auto bytes = size(name);
  if (!bytes) return failure(bytes);
  std::vector<std::byte> content(static_cast<std::size_t>(*bytes));
  if (auto done = read(name, 0, content); !done) return failure(done);
  return content;
}

}  // namespace bentlight
