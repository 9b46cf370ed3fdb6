#include "base/sealed_folder.h"

#include <fmt/format.h>

#include <algorithm>

#include "base/digest.h"
#include "base/limits.h"
#include "base/text.h"

namespace bentlight {

namespace {

constexpr std::string_view manifest_name = "manifest.txt";
constexpr std::string_view first_line = "bentlight sealed folder 1";
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
  std::string manifest = fmt::format("{}\n", first_line);
  for (const std::string& name : names) {
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

Expected<std::shared_ptr<const SealedFolder>> SealedFolder::open(const FileSystem& files,
                                                                 const std::filesystem::path& folder) {
  const std::shared_ptr<SealedFolder> sealed(new SealedFolder(folder));
  const std::string manifest_file(manifest_name);
  const auto text = read_whole(files, folder / manifest_name, manifest_bytes);
  if (!text) return sealed->damaged(manifest_file, text.error().text);
  auto lines = split(*text, '\n');
  if (lines.size() < 3 || lines.front() != first_line)
    return sealed->damaged(manifest_file, "of another version, or torn");
  const std::string& sum = lines[lines.size() - 2];
  const std::size_t above = text->size() - sum.size() - 1;
  if (sum != fmt::format("{:x}", checksum(as_bytes(std::string_view(*text).substr(0, above))))) {
    return sealed->damaged(manifest_file, "altered or torn");
  }
  for (std::size_t i = 1; i + 2 < lines.size(); ++i) {
    const auto words = split(lines[i], ' ');
    const std::string& name = words.front();
    File entry{.bytes = std::stoull(words.at(1))};
    for (std::size_t w = 2; w < words.size(); ++w) entry.pieces.push_back(std::stoull(words[w], nullptr, 16));
    auto file = files.open(folder / name);
    if (!file) return sealed->damaged(name, file.error().text);
    const auto stamp = (*file)->stamp();
    if (!stamp || stamp->size_bytes != entry.bytes)
      return sealed->damaged(name, "of another size than when it was sealed");
    entry.file = std::move(*file);
    sealed->files_.emplace(name, std::move(entry));
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
    if (auto read = file.file->read_at(start, piece); !read) return damaged(name, read.error().text);
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
