// An identifier of the HDF5 library that closes itself.
#pragma once

#include <hdf5.h>

#include <utility>

namespace bentlight::probe {

class Handle {
 public:
  using Close = herr_t (*)(hid_t);

  Handle() = default;
  Handle(hid_t id, Close close) : id_(id), close_(close) {}
  Handle(Handle&& other) noexcept : id_(std::exchange(other.id_, H5I_INVALID_HID)), close_(other.close_) {}
  Handle& operator=(Handle&& other) noexcept {
    std::swap(id_, other.id_);
    std::swap(close_, other.close_);
    return *this;
  }
  ~Handle() {
    if (id_ >= 0) close_(id_);
  }

  hid_t id() const { return id_; }
  explicit operator bool() const { return id_ >= 0; }

 private:
  hid_t id_ = H5I_INVALID_HID;
  Close close_ = nullptr;
};

}  // namespace bentlight::probe
