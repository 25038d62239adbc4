#pragma once

#include <memory>
#include <string>

#include "driver/core/error.h"

namespace shuntwright::simhost {

/// A pseudo terminal, and a symbolic link by which it is found. Its slave end is kept open, so that a client
/// that leaves is no end of file for the master. The link and the slave end go with it.
class PtyLink {
 public:
  /// Errors: io; the link's name is taken by anything but a link that an earlier simulator left behind (as
  /// root, a real device's node could be lost).
  static Result<std::unique_ptr<PtyLink>> make(const std::string& link);
  ~PtyLink();
  PtyLink(const PtyLink&) = delete;
  PtyLink& operator=(const PtyLink&) = delete;

  /// The master end, once; who takes it closes it.
  int takeMaster();

 private:
  explicit PtyLink(std::string link) : link_(std::move(link)) {}

  std::string link_, slaveName_;
  int master_ = -1, slave_ = -1;
  bool linked_ = false;
};

}  // namespace shuntwright::simhost
