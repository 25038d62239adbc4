#pragma once

#include <chrono>
#include <map>
#include <optional>
#include <string>
#include <vector>

#include "driver/core/clock.h"
#include "driver/core/error.h"
#include "driver/description/text_template.h"
#include "driver/units/units.h"

namespace shuntwright::description {

/// A value with a relative half-width, rectangular (what a data sheet calls a tolerance).
struct Toleranced {
  units::Resistance value;
  units::Fraction tolerance;
};

// ---- how it is reached ----------------------------------------------------------------------------

struct SerialSettings {
  enum class Parity { none, even, odd };
  enum class Flow { none, hardware, software };
  int baud = 9600;
  int dataBits = 8;
  int stopBits = 1;
  Parity parity = Parity::none;
  Flow flow = Flow::none;
};

struct TcpSettings {
  int port = 0;  ///< used when the rack's port names none
};

// ---- how bytes become lines -----------------------------------------------------------------------

/// A check sum over the characters of a line before `separator`, appended as hexadecimal digits.
struct Checksum {
  enum class Kind { none, sum8, xor8, crc16_modbus, crc16_ccitt_false };
  Kind kind = Kind::none;
  std::string separator;  ///< between text and check sum: "*"
};

/// The text-line protocol. (Binary frames, Modbus and USB get their own struct beside this one.)
struct TextProtocol {
  Place place;
  std::string requestEnd = "\n";
  std::string answerEnd = "\n";
  bool echo = false;        ///< the device repeats each request before it answers
  Checksum checksum;        ///< on requests and answers alike
  Nanoseconds timeout = std::chrono::milliseconds(500);
  int retries = 1;          ///< further tries after a time-out or a damaged answer
  Nanoseconds gap{0};       ///< least time between the end of an answer and the next request
  int longestLine = 4096;   ///< bytes; a longer line is reported and skipped
};

// ---- what it is asked -----------------------------------------------------------------------------

/// A request and what a good answer looks like. No answer template: nothing is waited for.
struct Exchange {
  Place place;
  TextTemplate ask;
  std::optional<TextTemplate> answer;
};

/// An answer that means "no": fields {code} and {text}.
struct ErrorAnswer {
  TextTemplate pattern;
};

/// Fields of `identify.answer`: {model}, {serial}, {version}, {skip}; `model` must equal this text.
struct Identify {
  Exchange exchange;
  std::string model;  ///< expected {model}; empty: any
};

enum class ValueUnit { volt_per_volt, millivolt_per_volt, microvolt_per_volt };

/// Bridge inputs of an amplifier.
struct Inputs {
  Place place;
  int count = 0;
  int first = 1;                       ///< number of the first input on the wire
  ValueUnit gives = ValueUnit::millivolt_per_volt;
  std::vector<std::string> saturated;  ///< words sent in place of a value that is out of range
  std::vector<std::string> missing;    ///< words sent in place of a value that is not there
  units::Ratio fullScale = 4.0 * units::millivolt_per_volt;
  units::Ratio resolution = 1e-6 * units::millivolt_per_volt;
  units::Ratio zeroStability;          ///< half-width by which the offset may wander within a test
  units::Ratio zeroOffset = 0.01 * units::millivolt_per_volt;  ///< half-width of its own offset at zero ratio
  units::Resistance inputResistance = 1.0 * units::gigaohm;
  std::vector<Toleranced> completions;           ///< quarter-bridge completion resistors on offer
  Toleranced halfBridge;                         ///< each of the two inner half-bridge resistors; 0 ohm: it has none
  std::vector<units::Voltage> excitations;       ///< choices
  std::vector<units::Frequency> rates;           ///< choices, samples/s a channel
  Nanoseconds filterTimeConstant{0};             ///< of the first-order input filter

  std::optional<Exchange> read;           ///< polled: {first} {last} -> {values:,}
  std::optional<Exchange> streamStart;    ///< streamed
  std::optional<Exchange> streamStop;
  std::optional<TextTemplate> streamLine;  ///< {counter} {values:,}
  int counterBits = 0;                     ///< width of {counter}; it wraps; 0: no counter
  std::optional<Exchange> setRate;         ///< {rate} in Hz
  std::optional<Exchange> setExcitation;   ///< {excitation} in V

  bool streams() const { return streamStart.has_value(); }
};

/// Relays of a relay board or of an amplifier that has some.
struct Relays {
  Place place;
  int count = 0;
  int first = 1;
  Nanoseconds operateTime = std::chrono::milliseconds(10);  ///< longest, bounce included
  Nanoseconds releaseTime = std::chrono::milliseconds(10);
  units::Resistance contactResistance = 100.0 * units::milliohm;  ///< typical, closed
  units::Resistance contactTolerance = 100.0 * units::milliohm;   ///< half-width about it, absolute
  std::optional<units::Resistance> leakage;  ///< across an open relay, at least this; none: taken as perfect
  bool latching = false;  ///< stay as they are when power goes

  Exchange close;                     ///< {relay}
  Exchange open;                      ///< {relay}
  std::optional<Exchange> openAll;
  std::optional<Exchange> state;      ///< {relay} -> {state}
  std::string closedWord = "1";       ///< {state} of a closed relay
  std::string openWord = "0";
};

/// One kind of device.
struct Profile {
  std::string file;
  std::string text;   ///< the file's text, kept in records
  std::string name;   ///< "text-polled-amplifier"
  std::string title;
  std::optional<SerialSettings> serial;
  std::optional<TcpSettings> tcp;
  TextProtocol protocol;
  std::optional<Identify> identify;
  std::vector<ErrorAnswer> errors;
  std::optional<Inputs> inputs;
  std::optional<Relays> relays;
};

}  // namespace shuntwright::description
