#pragma once

#include <hdf5.h>

#include <utility>

namespace shuntwright::recording {

/// An HDF5 identifier that closes itself. Invalid when the call that made it failed.
class Handle {
 public:
  Handle() = default;
  Handle(hid_t id, herr_t (*close)(hid_t)) : id_(id), close_(close) {}
  Handle(Handle&& other) noexcept : id_(std::exchange(other.id_, H5I_INVALID_HID)), close_(other.close_) {}
  Handle& operator=(Handle&& other) noexcept {
    std::swap(id_, other.id_);
    std::swap(close_, other.close_);
    return *this;
  }
  ~Handle() { reset(); }

  void reset() {
    if (id_ >= 0) close_(id_);
    id_ = H5I_INVALID_HID;
  }
  operator hid_t() const { return id_; }
  bool valid() const { return id_ >= 0; }

 private:
  hid_t id_ = H5I_INVALID_HID;
  herr_t (*close_)(hid_t) = nullptr;
};

/// Keeps HDF5 from printing its error stack; ours says what matters.
inline void quietHdf5() { H5Eset_auto2(H5E_DEFAULT, nullptr, nullptr); }

}  // namespace shuntwright::recording
