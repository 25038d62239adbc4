#pragma once

#include <string>
#include <string_view>
#include <vector>

#include "driver/core/bytes.h"
#include "driver/core/clock.h"
#include "driver/core/error.h"
#include "driver/core/task.h"
#include "driver/description/rack.h"
#include "driver/transport/stream.h"

namespace shuntwright::rack {

/// What it takes to open every relay of a rack without profile, protocol or state: bytes and waits. Worked
/// out before the first relay closes and kept as a text file, so that whoever finds relays closed can send it
/// even where nothing else of the program still works.
///
///     # open every relay of "bench"
///     device relays1 tcp:127.0.0.1:47003
///     send "\r\n"
///     wait 50
///     send "OPEN ALL\r\n"
///     wait 50
///
/// A serial port carries its settings: `device relays1 serial:/dev/ttyUSB0 9600 8 none 1 none`. Waits are in
/// milliseconds. Text in quotes knows \r \n \t \\ \" and \xNN.
struct OpenAllScript {
  struct Step {
    Bytes send;
    Nanoseconds wait{0};
  };
  struct Device {
    std::string name;
    std::string port;
    std::string serialSettings;  ///< "9600 8 none 1 none", empty for TCP
    std::vector<Step> steps;
  };
  std::string rack;
  std::vector<Device> devices;

  std::string text() const;
};

/// Errors: bad_use when a relay profile's requests cannot be filled in.
Result<OpenAllScript> compileOpenAll(const description::Rack& rack);

/// Errors: bad_file with the line.
Result<OpenAllScript> parseOpenAll(std::string_view text, const std::string& file);

/// Sends one device's part. What the device answers is read and thrown away. Errors: the stream's.
Task<Result<void>> playOpenAll(const OpenAllScript::Device& device, transport::Stream& stream, Clock& clock);

}  // namespace shuntwright::rack
