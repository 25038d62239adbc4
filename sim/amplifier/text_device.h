#pragma once

#include <memory>
#include <string>
#include <vector>

#include "sim/amplifier/bridge_input.h"
#include "sim/amplifier/device.h"
#include "sim/relays/relay_board.h"
#include "sim/wire/text_responder.h"

namespace shuntwright::sim {

/// An amplifier, a relay board, or both in one box, from its profile alone.
class TextDevice final : public Device, private TextResponder {
 public:
  /// @param inputs  one an input of the profile, null where nothing is connected; outlive this
  /// @param relays  null when the profile has none
  TextDevice(std::shared_ptr<const description::Profile> profile, std::vector<BridgeInput*> inputs,
             std::unique_ptr<RelayBoard> relays, DeviceFaults faults, const Imperfections& imperfections,
             Instant start, Random random, std::string serialNumber);

  void connected(Instant now) override;
  void feed(ByteView bytes, Instant now) override;
  void advance(Instant now) override;
  Bytes take() override { return takeBytes(); }
  Instant nextEvent() const override;
  /// Takes the samples of a stream that are due before `when`: something that they see is about to change.
  void sampleBefore(Instant when);
  std::optional<Instant> absentUntil(Instant now) const override { return unpluggedUntil(now); }

  RelayBoard* relays() { return relays_.get(); }

 private:
  bool handle(std::string_view line, Instant now) override;
  bool handleInputs(std::string_view line, Instant now);
  bool handleRelays(std::string_view line, Instant now);
  void addValue(std::string& text, std::size_t input, Instant now);
  void setRate(double rate_Hz);
  Instant frameDue(std::uint64_t ahead = 0) const;
  void streamFrame(Instant when);

  std::vector<BridgeInput*> inputs_;
  std::unique_ptr<RelayBoard> relays_;
  double perUnit_ = 1;       ///< V/V of one shown unit
  double digit_ = 1;         ///< resolution, in the shown unit
  int decimals_ = 5;
  long long lastDigits_ = 1;  ///< resolution in units of the last decimal
  double fullScale_ = 1;     ///< shown unit
  std::string separator_ = ",";
  double rate_Hz_ = 10;
  Nanoseconds sendEvery_;
  std::uint64_t packet_ = 1;  ///< frames sent at once
  bool streaming_ = false;
  Instant streamStart_;
  std::uint64_t frame_ = 0;  ///< since the stream began
  std::uint64_t counter_ = 0;
  std::string values_, line_;
};

}  // namespace shuntwright::sim
