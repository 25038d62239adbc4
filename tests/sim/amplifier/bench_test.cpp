// A simulated rack as a client sees it: bytes written here by hand, from the shipped profiles' description.
#include "sim/amplifier/bench.h"

#include <gtest/gtest.h>

#include <charconv>
#include <cmath>
#include <cstdio>
#include <string>
#include <vector>

#include "tests/support/virtual_bench.h"

namespace shuntwright::sim {
namespace {

using namespace std::chrono_literals;
using description::RelayRef;

/// A device with a client that talks to it; time is what the test says.
class Talk {
 public:
  Talk(Bench& bench, const std::string& device, Instant now) : device_(bench.device(device)), now_(now) {}

  /// Everything that comes within `wait` of sending.
  std::string ask(const std::string& request, Nanoseconds wait = 50ms) {
    device_.feed(bytesOf(request), now_);
    return listen(wait);
  }
  std::string listen(Nanoseconds wait) {
    std::string heard;
    const Instant end = now_ + wait;
    for (;;) {
      const Bytes bytes = device_.take();
      heard += textOf(bytes);
      const Instant next = device_.nextEvent();
      if (next > end) break;
      now_ = std::max(now_, next);
      device_.advance(now_);
    }
    now_ = end;
    return heard;
  }
  Instant now() const { return now_; }
  Device& device() { return device_; }

 private:
  Device& device_;
  Instant now_;
};

std::vector<std::string> split(const std::string& text, const std::string& by) {
  std::vector<std::string> parts;
  std::size_t from = 0, at;
  while ((at = text.find(by, from)) != std::string::npos) {
    parts.push_back(text.substr(from, at - from));
    from = at + by.size();
  }
  if (from < text.size()) parts.push_back(text.substr(from));
  return parts;
}

/// Exclusive or of the characters, as two hexadecimal digits, and the line's end.
std::string polled(const std::string& text) {
  unsigned sum = 0;
  for (const char c : text) sum ^= static_cast<unsigned char>(c);
  char tail[8];
  std::snprintf(tail, sizeof tail, "*%02X\r\n", sum);
  return text + tail;
}

class BenchTest : public ::testing::Test {
 protected:
  const Instant start = VirtualClock::kDefaultStart;
  const description::Rack small = test::shippedRack("small_bench.toml");
  const description::Rack gantry = test::shippedRack("gantry_beam.toml");
  Scenario scenario;

  Bench bench(const description::Rack& rack, std::uint64_t seed = 1) {
    return Bench(rack, scenario, seed, start);
  }
  void fault(const std::string& device, DeviceFault::Kind kind, const std::string& request, int from = 1,
             int count = 1 << 30, Nanoseconds delay = 0ns) {
    scenario.devices[device].requests.push_back({kind, request, from, count, delay});
  }
};

TEST_F(BenchTest, relayBoardAnswersEchoesAndReadsBack) {
  auto world = bench(small);
  Talk board(world, "relays1", start);
  EXPECT_EQ(board.ask("IDENT\r\n"), "IDENT\r\nRELAY32/SIM-relays1/1.0\r\n");
  EXPECT_EQ(board.ask("STATE 01\r\n"), "STATE 01\r\nSTATE 01 OPEN\r\n");
  EXPECT_EQ(board.ask("CLOSE 01\r\n"), "CLOSE 01\r\nOK\r\n");
  EXPECT_EQ(board.ask("STATE 01\r\n"), "STATE 01\r\nSTATE 01 CLOSED\r\n");
  EXPECT_EQ(world.closedRelays(), (std::vector<RelayRef>{{"relays1", 1}}));
  EXPECT_EQ(board.ask("OPEN ALL\r\n"), "OPEN ALL\r\nOK\r\n");
  EXPECT_EQ(board.ask("STATE 01\r\n"), "STATE 01\r\nSTATE 01 OPEN\r\n");
  EXPECT_EQ(board.ask("CLOSE 33\r\n"), "CLOSE 33\r\n?3 no such relay\r\n");
  EXPECT_EQ(board.ask("HELLO\r\n"), "HELLO\r\n?2 not understood\r\n");
  EXPECT_TRUE(world.closedRelays().empty());
}

TEST_F(BenchTest, requestsMayComeInAnyPieces) {
  auto whole = bench(small), pieces = bench(small);
  Talk one(whole, "relays1", start), other(pieces, "relays1", start);
  const std::string request = "CLOSE 02\r\nSTATE 02\r\n";
  std::string heard;
  for (const char c : request) heard += other.ask(std::string(1, c), 0ns);
  EXPECT_EQ(one.ask(request), heard + other.listen(50ms));
}

TEST_F(BenchTest, anAnswerTakesItsTime) {
  scenario.imperfections.answerDelay = 20ms;
  auto world = bench(small);
  Talk board(world, "relays1", start);
  EXPECT_EQ(board.ask("IDENT\r\n", 19ms), "IDENT\r\n") << "the echo comes at once";
  EXPECT_EQ(board.listen(2ms), "RELAY32/SIM-relays1/1.0\r\n");
}

TEST_F(BenchTest, polledAmplifierGivesTheRatioWithCheckSums) {
  scenario.imperfections.noise = scenario.imperfections.mains = scenario.imperfections.drift = units::Ratio();
  scenario.imperfections.offset = units::Ratio();
  auto world = bench(gantry);
  Talk amplifier(world, "amp1", start);
  EXPECT_EQ(amplifier.ask(polled("ID?")), polled("ID POLL16,P16-0001,1.0"));
  const std::string heard = amplifier.ask(polled("RD 01 02"));
  ASSERT_EQ(heard, polled(heard.substr(0, heard.find('*'))));
  const auto values = split(heard.substr(3, heard.find('*') - 3), ",");
  ASSERT_EQ(values.size(), 2u);
  for (int k = 0; k < 2; ++k) {
    const auto truth = world.truth(k == 0 ? "S01" : "S02", start);
    const double shown_mV_per_V = std::stod(values[static_cast<std::size_t>(k)]);
    // Within half a digit of 0.00001 mV/V.
    EXPECT_NEAR(shown_mV_per_V, truth.amplifierSpan * 1e3 * truth.noiselessRatio.in(units::volt_per_volt),
                0.50001e-5);
  }
  EXPECT_EQ(amplifier.ask(polled("RD 16 17")), polled("ERR 3 no such input"));
  EXPECT_EQ(amplifier.ask(polled("RATE 51")), polled("ERR 4 no such rate"));
  EXPECT_EQ(amplifier.ask(polled("RATE 50")), polled("OK"));
  EXPECT_EQ(amplifier.ask(polled("EXC 9")), polled("ERR 4 no such excitation"));
  EXPECT_EQ(amplifier.ask(polled("EXC 2.5")), polled("OK"));
  EXPECT_EQ(amplifier.ask("ID?*00\r\n"), polled("ERR 1 check sum"));
  EXPECT_EQ(amplifier.ask("ID?\r\n"), polled("ERR 1 check sum"));
}

TEST_F(BenchTest, streamingAmplifierSendsNumberedLinesAtItsRate) {
  auto world = bench(small);
  Talk amplifier(world, "amp1", start);
  EXPECT_EQ(amplifier.ask("*RATE 100\n"), "#RATE 100\r\n");
  const auto lines = split(amplifier.ask("*GO\n", 1004ms), "\r\n");
  ASSERT_EQ(lines.size(), 101u);  // the answer, then one every 10 ms from 5 ms on
  EXPECT_EQ(lines[0], "#GO");
  for (std::size_t k = 1; k < lines.size(); ++k) {
    char number[8];
    std::snprintf(number, sizeof number, "@%04X ", static_cast<unsigned>(k - 1));
    EXPECT_EQ(lines[k].substr(0, 6), number);
    const auto values = split(lines[k].substr(6), ";");
    ASSERT_EQ(values.size(), 16u);
    EXPECT_EQ(values[15], "---") << "nothing is connected there";
    EXPECT_LT(std::abs(std::stod(values[0])), 3000) << "microvolt per volt";
  }
  EXPECT_TRUE(amplifier.ask("*RATE 20\n").starts_with("#NO 4: streaming\r\n"));
  const std::string stopped = amplifier.ask("*HALT\n");
  EXPECT_TRUE(stopped.ends_with("#HALT\r\n"));
  EXPECT_EQ(amplifier.listen(10s), "");
}

TEST_F(BenchTest, theRunningNumberWrapsAndTellsLostLines) {
  scenario.devices["amp1"].lostFrames = 0.1;
  auto world = bench(small);
  Talk amplifier(world, "amp1", start);
  amplifier.ask("*RATE 100\n");
  const auto lines = split(amplifier.ask("*GO\n", 656s), "\r\n");  // 65 600 frames: past 65 536
  std::size_t gaps = 0, wraps = 0;
  unsigned last = 0xffff;
  for (std::size_t k = 1; k < lines.size(); ++k) {
    unsigned number = 0;
    std::from_chars(lines[k].data() + 1, lines[k].data() + 5, number, 16);
    gaps += (number - last - 1) & 0xffff;
    wraps += number < last && k > 1;
    last = number;
  }
  EXPECT_EQ(wraps, 1u);
  // Binomial: 6 560 +- 77.
  EXPECT_NEAR(static_cast<double>(gaps), 6560, 4 * 77);
  EXPECT_NEAR(static_cast<double>(lines.size() - 1 + gaps), 65600, 12);
}

TEST_F(BenchTest, saturationIsSaidByTheProfilesWords) {
  scenario.channels["S01"].saturated = true;
  auto world = bench(gantry);
  Talk amplifier(world, "amp1", start);
  EXPECT_EQ(amplifier.ask(polled("RD 01 01")), polled("RD OVR"));
  // A bridge far out of range is said with its sign.
  scenario.channels.clear();
  scenario.imperfections.completions = 50;
  const Scenario wide = scenario;
  int above = 0, below = 0;
  for (std::uint64_t seed = 1; seed < 60; ++seed) {
    auto other = Bench(small, wide, seed, start);
    Talk stream(other, "amp1", start);
    const auto lines = split(stream.ask("*GO\n", 10ms), "\r\n");
    const auto truth = other.truth("Q3", start);
    const double shown = truth.amplifierSpan * 1e6 * truth.noiselessRatio.in(units::volt_per_volt);
    const auto first = split(lines.at(1).substr(6), ";").at(0);
    // The offset, 10 microvolt per volt at most, is not part of the truth.
    if (std::abs(shown) > 5020) {
      EXPECT_EQ(first, shown > 0 ? "+OVL" : "-OVL");
    } else if (std::abs(shown) < 4980) {
      EXPECT_NE(first.back(), 'L');
    }
    above += shown > 5020;
    below += shown < -5020;
  }
  EXPECT_GT(above, 0);
  EXPECT_GT(below, 0);
}

TEST_F(BenchTest, theSameSeedGivesTheSameBytes) {
  const auto session = [&](std::uint64_t seed) {
    auto world = bench(gantry, seed);
    world.startLoad(start + 1s);
    Talk polledOne(world, "amp1", start), streamed(world, "amp2", start), relays(world, "relays1", start);
    std::string all =
        streamed.ask("*GO\n", 1s) + relays.ask("CLOSE 03\r\n", 1s) + polledOne.ask(polled("RD 01 16"), 1s);
    return all + streamed.listen(5s) + polledOne.ask(polled("RD 01 16"));
  };
  EXPECT_EQ(session(7), session(7));
  EXPECT_NE(session(7), session(8));
}

TEST_F(BenchTest, aShuntStepsItsOwnChannelOnly) {
  auto world = bench(small);
  Talk board(world, "relays1", start);
  const auto ratio = [&](const char* channel) {
    return world.truth(channel, board.now()).noiselessRatio.in(units::volt_per_volt);
  };
  const double q3 = ratio("Q3"), q2 = ratio("Q2"), h1 = ratio("H1");
  board.ask("CLOSE 01\r\n", 1s);
  EXPECT_NEAR(1e3 * (ratio("Q3") - q3), 0.48, 0.02)
      << "174.65 kohm across 350 ohm, less the loss in 30 m of AWG 26";
  EXPECT_NEAR(ratio("Q2"), q2, 1e-7);
  EXPECT_NEAR(ratio("H1"), h1, 1e-7);
}

TEST_F(BenchTest, swappedRelaysWorkEachOthersShunts) {
  scenario.swapped = {{{"relays1", 1}, {"relays1", 3}}};
  auto world = bench(small);
  Talk board(world, "relays1", start);
  const auto ratio = [&](const char* channel) {
    return world.truth(channel, board.now()).noiselessRatio.in(units::volt_per_volt);
  };
  const double q3 = ratio("Q3"), h1 = ratio("H1");
  board.ask("CLOSE 01\r\n", 1s);
  EXPECT_NEAR(ratio("Q3"), q3, 1e-7);
  EXPECT_GT(std::abs(ratio("H1") - h1), 1e-5);
  EXPECT_TRUE(world.relayClosed({"relays1", 1})) << "the relay itself is the one that was asked";
}

TEST_F(BenchTest, deadAndWeldedRelaysReadBackWhatTheyAre) {
  scenario.dead = {{"relays1", 1}};
  scenario.welded = {{"relays1", 2}};
  auto world = bench(small);
  Talk board(world, "relays1", start);
  EXPECT_EQ(board.ask("CLOSE 01\r\n"), "CLOSE 01\r\nOK\r\n");
  EXPECT_EQ(board.ask("STATE 01\r\n"), "STATE 01\r\nSTATE 01 OPEN\r\n");
  board.ask("CLOSE 02\r\n");
  board.ask("OPEN 02\r\n");
  EXPECT_EQ(board.ask("STATE 02\r\n"), "STATE 02\r\nSTATE 02 CLOSED\r\n");
}

TEST_F(BenchTest, everyClosingDrawsItsContactAnew) {
  auto world = bench(small);
  Talk board(world, "relays1", start);
  std::vector<double> steps;
  for (int k = 0; k < 2; ++k) {
    board.ask("CLOSE 01\r\n", 1s);
    steps.push_back(world.truth("Q3", start).noiselessRatio.in(units::volt_per_volt));
    board.ask("OPEN 01\r\n", 1s);
  }
  EXPECT_NE(steps[0], steps[1]);
  EXPECT_NEAR(steps[0], steps[1], 0.5e-3 * 0.1 / 174650) << "by at most 0.1 ohm of 174.65 kohm";
  for (const auto& event : world.relayEvents()) EXPECT_EQ(event.relay, (RelayRef{"relays1", 1}));
  EXPECT_GE(world.relayEvents().size(), 4u);
}

TEST_F(BenchTest, faultsHitTheRequestTheyName) {
  fault("relays1", DeviceFault::Kind::mute, "close", 2, 1);
  fault("relays1", DeviceFault::Kind::garbage, "state", 1, 1);
  fault("relays1", DeviceFault::Kind::half_answer, "state", 2, 1);
  fault("relays1", DeviceFault::Kind::error_answer, "open all");
  fault("relays1", DeviceFault::Kind::late, "identify", 1, 1, 2s);
  auto world = bench(small);
  Talk board(world, "relays1", start);
  EXPECT_EQ(board.ask("CLOSE 01\r\n"), "CLOSE 01\r\nOK\r\n");
  EXPECT_EQ(board.ask("CLOSE 02\r\n"), "CLOSE 02\r\n") << "mute the second time";
  EXPECT_TRUE(world.relayClosed({"relays1", 2})) << "it did what it was told all the same";
  EXPECT_EQ(board.ask("CLOSE 03\r\n"), "CLOSE 03\r\nOK\r\n");
  const std::string garbage = board.ask("STATE 01\r\n");
  EXPECT_EQ(garbage.find("STATE 01 "), std::string::npos);
  EXPECT_GT(garbage.size(), std::string("STATE 01\r\n").size());
  EXPECT_EQ(board.ask("STATE 01\r\n"), "STATE 01\r\nSTATE 0");
  EXPECT_EQ(board.ask("STATE 01\r\n"), "STATE 01\r\nSTATE 01 CLOSED\r\n");
  for (int k = 0; k < 3; ++k) EXPECT_EQ(board.ask("OPEN ALL\r\n"), "OPEN ALL\r\n?7 fault\r\n");
  EXPECT_EQ(board.ask("IDENT\r\n", 1999ms), "IDENT\r\n");
  EXPECT_EQ(board.listen(10ms), "RELAY32/SIM-relays1/1.0\r\n");
  EXPECT_EQ(board.ask("IDENT\r\n"), "IDENT\r\nRELAY32/SIM-relays1/1.0\r\n");
}

TEST_F(BenchTest, aSilentDeviceSaysAndHearsNothingMore) {
  scenario.devices["amp1"].silentAfter = 1s;
  auto world = bench(small);
  Talk amplifier(world, "amp1", start);
  EXPECT_GT(amplifier.ask("*GO\n", 900ms).size(), 1000u);
  amplifier.listen(100ms);
  EXPECT_EQ(amplifier.listen(1s), "");
  EXPECT_EQ(amplifier.ask("*WHO\n"), "");
  EXPECT_FALSE(amplifier.device().absentUntil(amplifier.now())) << "its plug is still in";
}

TEST_F(BenchTest, anUnpluggedDeviceIsAwayAndKeepsItsRelays) {
  scenario.devices["relays1"].unpluggedAfter = 1s;
  scenario.devices["relays1"].unpluggedFor = 2s;
  auto world = bench(small);
  Talk board(world, "relays1", start);
  board.ask("CLOSE 01\r\n");
  EXPECT_EQ(board.device().nextEvent(), start + 1s);
  board.listen(950ms);
  EXPECT_EQ(board.device().absentUntil(board.now()), start + 3s);
  EXPECT_EQ(board.ask("OPEN 01\r\n"), "");
  board.listen(2s);
  EXPECT_FALSE(board.device().absentUntil(board.now()));
  EXPECT_EQ(board.ask("STATE 01\r\n"), "STATE 01\r\nSTATE 01 CLOSED\r\n");
  EXPECT_EQ(board.device().nextEvent(), Instant::max());
}

TEST_F(BenchTest, aNewClientHearsNothingOfTheLastOne) {
  auto world = bench(small);
  Talk amplifier(world, "amp1", start), board(world, "relays1", start);
  amplifier.ask("*RATE 100\n");
  amplifier.ask("*GO\n", 14ms);  // one frame
  amplifier.device().feed(bytesOf("*HA"), amplifier.now());
  const Instant later = start + 100s;
  amplifier.device().connected(later);
  Talk next(world, "amp1", later);
  const auto lines = split(next.listen(100ms), "\r\n");
  EXPECT_NEAR(static_cast<double>(lines.size()), 10, 1) << "no backlog of the time nobody listened";
  unsigned number = 0;
  std::from_chars(lines[0].data() + 1, lines[0].data() + 5, number, 16);
  EXPECT_NEAR(number, 9995, 10) << "but its running number tells of it";
  EXPECT_TRUE(next.ask("*HALT\n").ends_with("#HALT\r\n")) << "half a request is forgotten";
}

}  // namespace
}  // namespace shuntwright::sim
