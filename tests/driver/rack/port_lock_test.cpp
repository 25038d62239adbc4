#include "driver/rack/port_lock.h"

#include <gtest/gtest.h>
#include <sys/wait.h>
#include <unistd.h>

#include <cstdlib>
#include <filesystem>

namespace shuntwright::rack {
namespace {

class PortLockTest : public ::testing::Test {
 protected:
  void SetUp() override {
    char pattern[] = "/tmp/shuntwright-lock-XXXXXX";
    folder_ = ::mkdtemp(pattern);
  }
  void TearDown() override { std::filesystem::remove_all(folder_); }

  static description::Port tcp(const std::string& host, int number) {
    description::Port port;
    port.path = host;
    port.tcpPort = number;
    port.text = "tcp:" + host + ":" + std::to_string(number);
    return port;
  }

  std::string folder_;
};

TEST_F(PortLockTest, aPortIsGivenToOneHolderAtATime) {
  auto first = PortLock::take(folder_, tcp("127.0.0.1", 5025));
  ASSERT_TRUE(first.has_value()) << first.error().text();
  auto second = PortLock::take(folder_, tcp("127.0.0.1", 5025));
  ASSERT_FALSE(second.has_value());
  EXPECT_EQ(second.error().code, ErrorCode::refused);
  EXPECT_NE(second.error().message.find("process " + std::to_string(::getpid())), std::string::npos)
      << second.error().text();
  EXPECT_TRUE(PortLock::take(folder_, tcp("127.0.0.1", 5026)).has_value());
}

TEST_F(PortLockTest, lettingGoFreesThePort) {
  {
    auto held = PortLock::take(folder_, tcp("127.0.0.1", 5025));
    ASSERT_TRUE(held.has_value());
  }
  EXPECT_TRUE(PortLock::take(folder_, tcp("127.0.0.1", 5025)).has_value());
}

TEST_F(PortLockTest, aProcessThatIsKilledHoldsNothing) {
  int ready[2];
  ASSERT_EQ(::pipe(ready), 0);
  const pid_t child = ::fork();
  if (child == 0) {
    auto held = PortLock::take(folder_, tcp("127.0.0.1", 5025));
    const char ok = held ? 'y' : 'n';
    if (::write(ready[1], &ok, 1) != 1) ::_exit(1);
    for (;;) ::pause();
  }
  char ok = 0;
  ASSERT_EQ(::read(ready[0], &ok, 1), 1);
  ASSERT_EQ(ok, 'y');
  EXPECT_FALSE(PortLock::take(folder_, tcp("127.0.0.1", 5025)).has_value());
  ::kill(child, SIGKILL);
  ::waitpid(child, nullptr, 0);
  EXPECT_TRUE(PortLock::take(folder_, tcp("127.0.0.1", 5025)).has_value());
  ::close(ready[0]);
  ::close(ready[1]);
}

TEST_F(PortLockTest, twoNamesOfOneSerialNodeAreOneLock) {
  const std::string node = folder_ + "/node", link = folder_ + "/link";
  ASSERT_EQ(::system(("touch " + node + " && ln -s " + node + " " + link).c_str()), 0);
  description::Port direct, byLink;
  direct.kind = byLink.kind = description::Port::Kind::serial;
  direct.path = node;
  direct.text = "serial:" + node;
  byLink.path = link;
  byLink.text = "serial:" + link;
  EXPECT_EQ(lockName(direct), lockName(byLink));
}

}  // namespace
}  // namespace shuntwright::rack
