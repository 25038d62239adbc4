#pragma once

#include <memory>
#include <vector>

#include "driver/device/connection.h"
#include "driver/device/device.h"

namespace shuntwright::device {

class Poller;

/// A device that speaks the text-line protocol.
class TextDevice final : public Device {
 public:
  explicit TextDevice(std::shared_ptr<Connection> connection) : connection_(std::move(connection)) {}
  ~TextDevice() override { close(); }

  const description::Device& described() const override { return connection_->described(); }
  Task<Result<Identity>> identify() override;
  Task<Result<void>> setRate(units::Frequency rate) override;
  Task<Result<void>> setExcitation(units::Voltage excitation) override;
  Task<Result<void>> closeRelay(int relay) override;
  Task<Result<void>> openRelay(int relay) override;
  Task<Result<void>> openAllRelays() override;
  Task<Result<bool>> relayClosed(int relay) override;
  Task<Result<void>> start(units::Frequency rate) override;
  Task<Result<SampleBlock>> next(Instant deadline) override;
  SampleBlock rest() override;
  Task<Result<void>> stop() override;
  void close() override;

  const Strays& strays() const { return connection_->strays(); }

 private:
  Task<Result<void>> work(const description::Exchange& exchange, std::vector<protocol::Value> values);
  Result<void> checkRelay(int relay) const;

  std::shared_ptr<Connection> connection_;
  std::shared_ptr<Poller> poller_;
  units::Frequency rate_;  ///< as last set on the device; 0: not yet
  bool running_ = false;
};

}  // namespace shuntwright::device
