#include "driver/rack/certificates.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

namespace shuntwright::rack {
namespace {

using namespace std::chrono_literals;

TEST(Certificates, holdOnTheirLastDayAndNotAfterIt) {
  description::Resistor resistor;
  EXPECT_FALSE(overdue(resistor, 2100y / 1 / 1)) << "one without a due date never ends";
  resistor.due = 2026y / 5 / 31;
  EXPECT_FALSE(overdue(resistor, 2026y / 5 / 31));
  EXPECT_TRUE(overdue(resistor, 2026y / 6 / 1));
}

// A day is UTC's: 86 399 s after the epoch is still its first day.
TEST(Certificates, theDayOfAMomentIsThatOfUtc) {
  EXPECT_EQ(isoText(dayOf(Instant(std::chrono::seconds(86399)))), "1970-01-01");
  EXPECT_EQ(isoText(dayOf(Instant(std::chrono::seconds(86400)))), "1970-01-02");
}

TEST(Certificates, onlyOverdueOnesThatAreUsedAreWarnedOf) {
  description::Rack rack;
  const std::string used = "RC";
  for (const std::string name : {used.c_str(), "SPARE"}) {
    rack.resistors[name].name = name;
    rack.resistors[name].place.line = 7;
    rack.resistors[name].due = 2026y / 5 / 31;
  }
  rack.channels.emplace_back().shunts.emplace_back().resistor = used;
  description::Diagnostics before, after;
  warnOfCertificates(rack, 2026y / 5 / 31, before);
  EXPECT_TRUE(before.problems().empty());
  warnOfCertificates(rack, 2026y / 6 / 1, after);
  ASSERT_EQ(after.problems().size(), 1u);
  EXPECT_TRUE(after.ok()) << "a warning";
  EXPECT_THAT(after.problems()[0].message, testing::HasSubstr(used + "\" was good until 2026-05-31"));
  EXPECT_EQ(after.problems()[0].place.line, 7);
}

}  // namespace
}  // namespace shuntwright::rack
