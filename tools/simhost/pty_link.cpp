#include "tools/simhost/pty_link.h"

#include <fcntl.h>
#include <stdlib.h>
#include <sys/stat.h>
#include <termios.h>
#include <unistd.h>

#include <cerrno>
#include <climits>
#include <cstring>
#include <string_view>
#include <utility>

namespace shuntwright::simhost {

namespace {

/// Where a symbolic link leads; empty when it is none.
std::string linkTarget(const std::string& path) {
  char target[PATH_MAX];
  const ssize_t size = ::readlink(path.c_str(), target, sizeof target);
  return size > 0 ? std::string(target, static_cast<std::size_t>(size)) : std::string();
}

}  // namespace

Result<std::unique_ptr<PtyLink>> PtyLink::make(const std::string& link) {
  std::unique_ptr<PtyLink> pty(new PtyLink(link));
  const auto wrong = [&](const char* what) {
    return fail(ErrorCode::io, std::string(what) + ": " + std::strerror(errno), link, "check the folder");
  };
  struct stat there {};
  if (::lstat(link.c_str(), &there) == 0) {
    if (!linkTarget(link).starts_with("/dev/pts/")) {
      return fail(ErrorCode::io, "something else is already there", link,
                  "serve on pseudo terminals in another folder with --pty");
    }
    if (::unlink(link.c_str()) != 0) return wrong("cannot replace the link");
  }
  pty->master_ = ::posix_openpt(O_RDWR | O_NOCTTY | O_CLOEXEC);
  char slaveName[128];
  if (pty->master_ < 0 || ::grantpt(pty->master_) != 0 || ::unlockpt(pty->master_) != 0 ||
      ::ptsname_r(pty->master_, slaveName, sizeof slaveName) != 0) {
    return wrong("cannot make a pseudo terminal");
  }
  pty->slaveName_ = slaveName;
  pty->slave_ = ::open(slaveName, O_RDWR | O_NOCTTY | O_CLOEXEC);
  if (pty->slave_ < 0) return wrong("cannot open the pseudo terminal");
  termios settings{};
  ::tcgetattr(pty->slave_, &settings);
  ::cfmakeraw(&settings);
  ::tcsetattr(pty->slave_, TCSANOW, &settings);
  if (::symlink(slaveName, link.c_str()) != 0) return wrong("cannot link the pseudo terminal");
  pty->linked_ = true;
  return pty;
}

PtyLink::~PtyLink() {
  if (slave_ >= 0) ::close(slave_);
  if (master_ >= 0) ::close(master_);
  // Another simulator may have put its own link there meanwhile.
  if (linked_ && linkTarget(link_) == slaveName_) ::unlink(link_.c_str());
}

int PtyLink::takeMaster() {
  return std::exchange(master_, -1);
}

}  // namespace shuntwright::simhost
