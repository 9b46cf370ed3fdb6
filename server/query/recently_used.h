// Keys in the order of their last use, within a bound.
#pragma once

#include <cstddef>
#include <cstdint>
#include <list>
#include <string>
#include <unordered_map>
#include <utility>
#include <vector>

namespace bentlight::query {

/// A bounded memory of keys and the bytes that each stands for: when it is over its limit, those used longest
/// ago go.
///
///   threads  needs one at a time
template <class Item>
class RecentlyUsed {
 public:
  explicit RecentlyUsed(std::uint64_t limit_bytes) : limit_bytes_(limit_bytes) {}

  /// The item, which becomes the latest; null when there is none.
  const Item* use(const std::string& key) {
    const auto found = places_.find(key);
    if (found == places_.end()) return nullptr;
    entries_.splice(entries_.begin(), entries_, found->second);
    return &found->second->item;
  }

  struct Entry {
    std::string key;
    Item item;
    std::uint64_t bytes;
  };

  /// Adds or replaces, as the latest. Gives what had to go for it, so that the caller can free it when no
  /// lock is held; the new entry itself if it alone is too large.
  std::vector<Entry> put(const std::string& key, Item item, std::uint64_t bytes) {
    remove(key);
    entries_.push_front({key, std::move(item), bytes});
    places_[key] = entries_.begin();
    bytes_ += bytes;
    std::vector<Entry> gone;
    while (bytes_ > limit_bytes_) {
      places_.erase(entries_.back().key);
      bytes_ -= entries_.back().bytes;
      gone.push_back(std::move(entries_.back()));
      entries_.pop_back();
    }
    return gone;
  }

  void remove(const std::string& key) {
    const auto found = places_.find(key);
    if (found == places_.end()) return;
    bytes_ -= found->second->bytes;
    entries_.erase(found->second);
    places_.erase(found);
  }

  std::uint64_t limit_bytes() const { return limit_bytes_; }
  std::uint64_t bytes() const { return bytes_; }
  std::size_t count() const { return entries_.size(); }

 private:
  const std::uint64_t limit_bytes_;
  std::list<Entry> entries_;  // latest first
  std::unordered_map<std::string, typename std::list<Entry>::iterator> places_;
  std::uint64_t bytes_ = 0;
};

}  // namespace bentlight::query
