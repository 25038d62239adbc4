// Simulated devices on real ports, talked to with bare system calls.
#include "tools/simhost/hosting.h"

#include <arpa/inet.h>
#include <fcntl.h>
#include <gtest/gtest.h>
#include <netinet/in.h>
#include <poll.h>
#include <sys/socket.h>
#include <sys/stat.h>
#include <unistd.h>

#include <cstdlib>
#include <filesystem>
#include <fstream>
#include <thread>

#include "tests/support/virtual_bench.h"
#include "tools/simhost/pty_link.h"
#include "tools/simhost/serve.h"

namespace shuntwright::simhost {
namespace {

namespace fs = std::filesystem;
using namespace std::chrono_literals;

/// A file descriptor with the client's side of the talk.
class Client {
 public:
  explicit Client(int descriptor) : descriptor_(descriptor) {}
  ~Client() {
    if (descriptor_ >= 0) ::close(descriptor_);
  }
  Client(const Client&) = delete;
  Client& operator=(const Client&) = delete;

  bool ok() const { return descriptor_ >= 0; }
  void send(const std::string& text) {
    ASSERT_EQ(::write(descriptor_, text.data(), text.size()), ssize_t(text.size()));
  }
  /// Reads until what came ends with `end`, the other side is gone, or nothing comes for 5 s.
  std::string until(const std::string& end) {
    std::string heard;
    while (!heard.ends_with(end)) {
      pollfd waiting{descriptor_, POLLIN, 0};
      if (::poll(&waiting, 1, 5000) <= 0) return heard + "<nothing>";
      char buffer[512];
      const ssize_t got = ::read(descriptor_, buffer, sizeof buffer);
      if (got <= 0) return heard + "<closed>";
      heard.append(buffer, static_cast<std::size_t>(got));
    }
    return heard;
  }

  /// Closes relay 07 and asks until its contact has: that takes the relay's operate time.
  void closeRelay07() {
    send("CLOSE 07\r\n");
    EXPECT_EQ(until("OK\r\n"), "CLOSE 07\r\nOK\r\n");
    for (int k = 0; k < 1000; ++k) {
      send("STATE 07\r\n");
      std::string heard = until("\r\n");
      if (heard == "STATE 07\r\n") heard = until("\r\n");
      if (heard.ends_with("CLOSED\r\n")) return;
      ASSERT_TRUE(heard.ends_with("OPEN\r\n")) << heard;
    }
    FAIL() << "relay 07 did not close";
  }

 private:
  int descriptor_;
};

int tcpTo(const std::string& port) {
  const int s = ::socket(AF_INET, SOCK_STREAM, 0);
  sockaddr_in address{};
  address.sin_family = AF_INET;
  address.sin_addr.s_addr = htonl(INADDR_LOOPBACK);
  address.sin_port = htons(static_cast<std::uint16_t>(std::stoi(port.substr(port.rfind(':') + 1))));
  if (::connect(s, reinterpret_cast<sockaddr*>(&address), sizeof address) == 0) return s;
  ::close(s);
  return -1;
}

class HostingTest : public ::testing::Test {
 protected:
  void SetUp() override {
    char pattern[] = "/tmp/shuntwright-hosting-XXXXXX";
    folder_ = ::mkdtemp(pattern);
  }
  void TearDown() override {
    finish();
    fs::remove_all(folder_);
  }

  /// Serves on a thread of its own until finish().
  void begin(const std::function<void(Hosting&)>& serveWhat) {
    clock_ = std::make_unique<RealClock>(context_);
    scaled_ = std::make_unique<ScaledClock>(*clock_, 20);
    bench_ = std::make_unique<sim::Bench>(rack_, scenario_, 1, scaled_->now());
    hosting_ = std::make_unique<Hosting>(context_, *bench_, *scaled_);
    serveWhat(*hosting_);
    thread_ = std::thread([this] { context_.run(); });
  }
  void finish() {
    if (!thread_.joinable()) return;
    context_.stop();
    thread_.join();
    hosting_.reset();
  }

  const description::Rack rack_ = test::shippedRack("small_bench.toml");
  sim::Scenario scenario_;
  std::string folder_;
  boost::asio::io_context context_;
  std::unique_ptr<RealClock> clock_;
  std::unique_ptr<ScaledClock> scaled_;
  std::unique_ptr<sim::Bench> bench_;
  std::unique_ptr<Hosting> hosting_;
  std::thread thread_;
};

TEST_F(HostingTest, overTcpOneClientAfterAnother) {
  std::string port;
  begin([&](Hosting& hosting) {
    auto served = hosting.onTcp("relays1", 0);
    ASSERT_TRUE(served) << served.error().text();
    EXPECT_EQ(served->device, "relays1");
    port = served->port;
  });
  ASSERT_TRUE(port.starts_with("tcp:127.0.0.1:"));
  {
    Client one(tcpTo(port));
    ASSERT_TRUE(one.ok());
    one.send("IDENT\r\n");
    EXPECT_EQ(one.until("1.0\r\n"), "IDENT\r\nRELAY32/SIM-relays1/1.0\r\n");
    one.closeRelay07();
    // A second one waits in the queue until the first has gone.
    Client two(tcpTo(port));
    ASSERT_TRUE(two.ok());
    two.send("IDENT\r\n");
    one.send("STATE 08\r\n");
    EXPECT_EQ(one.until("OPEN\r\n"), "STATE 08\r\nSTATE 08 OPEN\r\n");
  }
  Client three(tcpTo(port));
  ASSERT_TRUE(three.ok());
  three.send("STATE 07\r\n");
  EXPECT_EQ(three.until("CLOSED\r\n"), "STATE 07\r\nSTATE 07 CLOSED\r\n") << "relays stay as they were";
}

TEST_F(HostingTest, aTakenPortIsAnError) {
  begin([&](Hosting& hosting) {
    auto first = hosting.onTcp("relays1", 0);
    ASSERT_TRUE(first);
    const auto second = hosting.onTcp("amp1", std::stoi(first->port.substr(first->port.rfind(':') + 1)));
    ASSERT_FALSE(second);
    EXPECT_EQ(second.error().code, ErrorCode::io);
    EXPECT_NE(second.error().text().find(first->port), std::string::npos);
  });
}

TEST_F(HostingTest, overAPseudoTerminalClientsComeAndGo) {
  const std::string link = folder_ + "/relays1";
  begin([&](Hosting& hosting) {
    auto served = hosting.onPty("relays1", link);
    ASSERT_TRUE(served) << served.error().text();
    EXPECT_EQ(served->port, "serial:" + link);
  });
  for (int k = 0; k < 3; ++k) {
    Client one(::open(link.c_str(), O_RDWR | O_NOCTTY));
    ASSERT_TRUE(one.ok());
    if (k == 0) {
      one.closeRelay07();
    } else {
      one.send("STATE 07\r\n");
      EXPECT_EQ(one.until("CLOSED\r\n"), "STATE 07\r\nSTATE 07 CLOSED\r\n");
    }
  }
  finish();
  EXPECT_FALSE(fs::exists(fs::symlink_status(link))) << "the link goes with the host";
}

TEST_F(HostingTest, aPseudoTerminalGoesWithThePlugAndComesBack) {
  scenario_.devices["relays1"].unpluggedAfter = 20s;  // 1 s of real time
  scenario_.devices["relays1"].unpluggedFor = 4s;
  const std::string link = folder_ + "/relays1";
  begin([&](Hosting& hosting) { ASSERT_TRUE(hosting.onPty("relays1", link)); });
  {
    Client one(::open(link.c_str(), O_RDWR | O_NOCTTY));
    ASSERT_TRUE(one.ok());
    one.closeRelay07();
    EXPECT_EQ(one.until("<never>"), "<closed>");
  }
  int back = -1;
  for (int k = 0; k < 500 && back < 0; ++k) {
    ::poll(nullptr, 0, 10);
    back = ::open(link.c_str(), O_RDWR | O_NOCTTY);
  }
  Client two(back);
  ASSERT_TRUE(two.ok());
  two.send("STATE 07\r\n");
  EXPECT_EQ(two.until("CLOSED\r\n"), "STATE 07\r\nSTATE 07 CLOSED\r\n");
}

// A simulator run as root against a rack with real ports must not take a device's node for an old link of its
// own.
TEST_F(HostingTest, nothingButAnOldLinkOfASimulatorIsReplaced) {
  const std::string file = folder_ + "/ttyUSB0", byId = folder_ + "/by-id", old = folder_ + "/old";
  std::ofstream(file) << "precious";
  fs::create_symlink(file, byId);
  fs::create_symlink("/dev/pts/99999", old);
  for (const auto& path : {file, byId}) {
    const auto refused = PtyLink::make(path);
    ASSERT_FALSE(refused) << path;
    EXPECT_EQ(refused.error().code, ErrorCode::io);
    EXPECT_FALSE(refused.error().remedy.empty());
  }
  EXPECT_TRUE(fs::is_regular_file(file));
  EXPECT_EQ(fs::read_symlink(byId), file);
  const auto replaced = PtyLink::make(old);
  ASSERT_TRUE(replaced) << replaced.error().text();
  EXPECT_NE(fs::read_symlink(old), "/dev/pts/99999");
  EXPECT_FALSE(PtyLink::make(folder_ + "/no/such/folder"));
}

TEST_F(HostingTest, aLinkThatIsAnothersByNowIsLeftAlone) {
  const std::string link = folder_ + "/amp1";
  auto first = PtyLink::make(link);
  ASSERT_TRUE(first);
  auto second = PtyLink::make(link);
  ASSERT_TRUE(second);
  first->reset();
  EXPECT_TRUE(fs::exists(link));
  second->reset();
  EXPECT_FALSE(fs::exists(fs::symlink_status(link)));
}

}  // namespace
}  // namespace shuntwright::simhost
