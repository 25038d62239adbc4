#include "driver/description/quantity_text.h"

#include <gtest/gtest.h>

namespace {

using namespace shuntwright;
using namespace shuntwright::description;

TEST(ParseQuantity, readsNumberAndUnit) {
  struct Case {
    const char* text;
    const QuantityWords& words;
    double base;
  };
  const Case cases[] = {
      {"120 ohm", wordsOf<units::kind::Resistance>(), 120},
      {"59.88 kohm", wordsOf<units::kind::Resistance>(), 59880},
      {"59.88kohm", wordsOf<units::kind::Resistance>(), 59880},
      {" 5 mohm ", wordsOf<units::kind::Resistance>(), 0.005},
      {"5 Mohm", wordsOf<units::kind::Resistance>(), 5e6},
      {"1e3 ohm", wordsOf<units::kind::Resistance>(), 1000},
      {"120 \u03A9", wordsOf<units::kind::Resistance>(), 120},
      {"-0.5 mV/V", wordsOf<units::kind::Ratio>(), -0.0005},
      {"+2 mV/V", wordsOf<units::kind::Ratio>(), 0.002},
      {"0.1 %", wordsOf<units::kind::Fraction>(), 0.001},
      {"50 ppm", wordsOf<units::kind::Fraction>(), 50e-6},
      {"500 microstrain", wordsOf<units::kind::Strain>(), 500e-6},
      {"20 m", wordsOf<units::kind::Length>(), 20},
      {"100 Hz", wordsOf<units::kind::Frequency>(), 100},
      {"18 mm2", wordsOf<units::kind::Area>(), 18e-6},
      {"25 ppm/K", wordsOf<units::kind::TemperatureCoefficient>(), 25e-6},
      {"5 K", wordsOf<units::kind::TemperatureDifference>(), 5},
      {"200 MPa", wordsOf<units::kind::Stress>(), 200e6},
      {"50 kN", wordsOf<units::kind::Force>(), 50e3},
      {"5 V", wordsOf<units::kind::Voltage>(), 5},
      {"500 ms", durationWords(), 0.5},
      {"2 min", durationWords(), 120},
      {"22.5 degC", temperatureWords(), 22.5},
  };
  for (const Case& c : cases) {
    const auto got = parseQuantity(c.text, c.words);
    ASSERT_TRUE(got) << c.text << ": " << got.error().message;
    EXPECT_NEAR(*got, c.base, std::abs(c.base) * 1e-14) << c.text;
  }
}

TEST(ParseQuantity, saysWhatIsWrongAndHowToMendIt) {
  struct Case {
    const char* text;
    const QuantityWords& words;
    const char* message;
    const char* remedy;
  };
  const QuantityWords& resistance = wordsOf<units::kind::Resistance>();
  const Case cases[] = {
      {"350 Ohms", resistance, "unknown unit \"Ohms\" for a resistance", "did you mean \"350 ohm\"?"},
      {"350 Ohm", resistance, "unknown unit \"Ohm\" for a resistance", "did you mean \"350 ohm\"?"},
      {"5 kOhms", resistance, "unknown unit \"kOhms\" for a resistance", "did you mean \"5 kohm\"?"},
      {"5 furlong", resistance, "unknown unit \"furlong\" for a resistance",
       "units of resistance: ohm, mohm, kohm, Mohm, Gohm"},
      {"350", resistance, "\"350\" has no unit; a resistance needs one",
       "write it like \"120 ohm\" (units: ohm, mohm, kohm, Mohm, Gohm)"},
      {"ohm", resistance, "\"ohm\" is no resistance", "write it like \"120 ohm\""},
      {"", resistance, "\"\" is no resistance", "write it like \"120 ohm\""},
      {"0,1 %", wordsOf<units::kind::Fraction>(), "\"0,1 %\" is no fraction",
       "write the decimal point as \".\""},
      {"nan ohm", resistance, "\"nan ohm\" is no resistance", "write it like \"120 ohm\""},
      {"inf ohm", resistance, "\"inf ohm\" is no resistance", "write it like \"120 ohm\""},
      {"1e999 ohm", resistance, "\"1e999 ohm\" is no resistance", "write it like \"120 ohm\""},
      {"2 mv/V", wordsOf<units::kind::Ratio>(), "unknown unit \"mv/V\" for a ratio",
       "did you mean \"2 mV/V\"?"},
      {"100 hz", wordsOf<units::kind::Frequency>(), "unknown unit \"hz\" for a frequency",
       "did you mean \"100 Hz\"?"},
  };
  for (const Case& c : cases) {
    const auto got = parseQuantity(c.text, c.words);
    ASSERT_FALSE(got) << c.text;
    EXPECT_EQ(got.error().message, c.message);
    EXPECT_EQ(got.error().remedy, c.remedy);
  }
}

TEST(Show, picksAReadableUnit) {
  EXPECT_EQ(show(120.0 * units::ohm), "120 ohm");
  EXPECT_EQ(show(59880.0 * units::ohm), "59.88 kohm");
  EXPECT_EQ(show(1000.0 * units::ohm), "1 kohm");
  EXPECT_EQ(show(0.05 * units::ohm), "50 mohm");
  EXPECT_EQ(show(0.0 * units::ohm), "0 ohm");
  EXPECT_EQ(show(5.0 * units::volt), "5 V");
  EXPECT_EQ(show(100.0 * units::hertz), "100 Hz");
  EXPECT_EQ(show(-2.0 * units::millivolt_per_volt), "-2 mV/V");
}

TEST(Show, comesBackThroughTheParser) {
  for (const double value : {1e-3, 0.27, 2.7, 350.4, 174650.0, 1e9}) {
    const auto back = parseQuantity(show(value * units::ohm), wordsOf<units::kind::Resistance>());
    ASSERT_TRUE(back);
    EXPECT_NEAR(*back, value, value * 1e-9);
  }
}

}  // namespace
