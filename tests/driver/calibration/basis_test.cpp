// proves P-17
// A record holds only for the rack it was made of, as that rack is described now.
#include "driver/calibration/basis.h"

#include <gtest/gtest.h>

#include <array>
#include <boost/asio/any_io_executor.hpp>
#include <boost/asio/awaitable.hpp>

#include "tests/driver/description/sample.h"
#include "tests/support/virtual_bench.h"

namespace shuntwright::calibration {
namespace {

description::Rack rackOf(const std::string& text, const std::string& profile = sample::kProfile) {
  description::Diagnostics d;
  auto loaded = description::loadRack("b/rack.toml",
                                      sample::reader({{"b/rack.toml", text}, {"p/device.toml", profile}}), d);
  if (!loaded) throw std::logic_error(d.render(false));
  return *std::move(loaded);
}

Record recordOf(const description::Rack& rack) {
  Record record;
  record.id = "20260504-093000-7f3a";
  record.rackName = rack.name;
  for (const auto& channel : rack.channels) {
    ChannelResult result;
    result.name = channel.name;
    result.basis = basisOf(rack, channel);
    record.channels.push_back(result);
  }
  return record;
}

Record original() {
  return recordOf(rackOf(sample::kRack));
}

TEST(Basis, whatACorrectionFollowsFromVoidsItAndIsToldInWords) {
  const std::vector<std::array<std::string, 3>> edits = {
      {"factor = 2.1", "factor = 2.08",
       "channel S01 is not as calibration record 20260504-093000-7f3a found it: gauge factor of arm 1 is "
       "2.08 within 1 % and was 2.1 within 1 %"},
      {"gauge = \"G350\"",
       "gauge = \"G350\"\ngauge_resistance = { value = \"350.4 ohm\", uncertainty = \"0.1 %\" }",
       "gauge resistance of arm 1 is 350.4 ohm"},
      {"resistance = \"350 ohm\"", "resistance = \"120 ohm\"",
       "completion resistor is 120 ohm and was 350 ohm"},
      {"value = \"174.65 kohm\"", "value = \"87.15 kohm\"", "shunt \"cal\" is 87150 ohm"},
      {"tolerance = \"0.1 %\"", "tolerance = \"0.01 %\"", "shunt \"cal\" is 174650 ohm within 0.01 %"},
      {"input = 1\n", "input = 3\n", "input is 3 and was 1"},
      {"circuit = \"quarter 3-wire\"", "circuit = \"quarter 2-wire\"",
       "circuit is quarter 2-wire and was quarter 3-wire"},
      {"length = \"20 m\"", "length = \"40 m\"", "lead COMP is 5.35"},
      {"excitation = \"5 V\"", "excitation = \"2.5 V\"", "excitation is 2.5 V and was 5 V"},
      {"relay = \"amp1/1\"", "relay = \"amp1/2\"", "by amp1/2"},
      {"across = \"completion\"", "across = [\"EXC+\", \"SIG+\"]", "shunt \"cal\" is "},
      {"rated_value = 50", "rated_value = 100", "channel F1 is not as"},
  };
  for (const auto& [from, to, told] : edits) {
    const auto holds = stillHolds(original(), rackOf(sample::spoilt(sample::kRack, from, to)));
    ASSERT_FALSE(holds.has_value()) << to;
    EXPECT_EQ(holds.error().code, ErrorCode::refused);
    EXPECT_NE(holds.error().message.find(told), std::string::npos) << holds.error().message;
    EXPECT_EQ(holds.error().remedy, "calibrate again");
    EXPECT_EQ(holds.error().where.substr(0, 12), "b/rack.toml:");
  }
}

TEST(Basis, rangeAndFilterOfTheProfileVoidIt) {
  const std::vector<std::array<std::string, 3>> edits = {
      {"full_scale = \"4 mV/V\"", "full_scale = \"8 mV/V\"", "amplifier's range is 8 mV/V and was 4 mV/V"},
      {"filter_time_constant = \"5 ms\"", "filter_time_constant = \"50 ms\"",
       "amplifier's filter is 0.05 s and was 0.005 s; 1 more"},
  };
  for (const auto& [from, to, told] : edits) {
    const auto holds =
        stillHolds(original(), rackOf(sample::kRack, sample::spoilt(sample::kProfile, from, to)));
    ASSERT_FALSE(holds.has_value()) << to;
    EXPECT_NE(holds.error().message.find(told), std::string::npos) << holds.error().message;
  }
}

TEST(Basis, commentsOrderNamesAndPortsLeaveItInForce) {
  std::string text = sample::kRack;
  text = sample::spoilt(text, "[rack]", "# as of today\n[rack]");
  text = sample::spoilt(text, "Sample bench", "The same bench");
  text = sample::spoilt(text, "47001", "47002");
  text = sample::spoilt(text, "\"174.65 kohm\"", "\"174650 ohm\"");
  for (int k = 0; k < 2; ++k) text = sample::spoilt(text, "G350", "GX");
  const auto second = text.find("[[channel]]", text.find("[[channel]]") + 1),
             first = text.find("[[channel]]");
  text = text.substr(0, first) + text.substr(second) + text.substr(first, second - first);
  const auto holds = stillHolds(original(), rackOf(text));
  EXPECT_TRUE(holds.has_value()) << holds.error().text();
}

TEST(Basis, anotherRackOfTheSameChannelNamesIsRefused) {
  const auto holds = stillHolds(original(), rackOf(sample::spoilt(sample::kRack, "\"bench\"", "\"tower\"")));
  ASSERT_FALSE(holds.has_value());
  EXPECT_NE(holds.error().message.find("is of rack bench and not of tower"), std::string::npos)
      << holds.error().text();
}

TEST(Basis, anotherDeviceInThePlaceOfTheCalibratedOneIsRefused) {
  test::VirtualBench bench(test::shippedRack("small_bench.toml"));
  auto record = bench.calibrate();
  ASSERT_TRUE(record.has_value()) << record.error().text();
  ASSERT_FALSE(record->devices.empty());
  ASSERT_FALSE(record->devices[0].serialNumber.empty());
  Record other = *record;
  other.devices[0].serialNumber = "90001";
  Result<void> same, swapped;
  const Record& own = *record;
  struct Check {
    static Task<Result<void>> run(rack::LiveRack* live, const Record* a, const Record* b, Result<void>* x,
                                  Result<void>* y) {
      *x = sameDevices(*a, *live);
      *y = sameDevices(*b, *live);
      co_return Result<void>{};
    }
  };
  const auto ran = bench.onRack([&](rack::LiveRack& live) -> Task<Result<void>> {
    return Check::run(&live, &own, &other, &same, &swapped);
  });
  ASSERT_TRUE(ran.has_value()) << ran.error().text();
  EXPECT_TRUE(same.has_value()) << same.error().text();
  ASSERT_FALSE(swapped.has_value());
  EXPECT_NE(swapped.error().message.find("90001"), std::string::npos) << swapped.error().text();
}

}  // namespace
}  // namespace shuntwright::calibration
