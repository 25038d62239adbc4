#pragma once

#include <span>
#include <vector>

#include "driver/calibration/channel_model.h"

namespace shuntwright::calibration {

/// What a channel's readings mean for one circuit: the amplifier's span, and the bridge as it is in the test.
struct Meaning {
  double span = 1;
  WorkingPoint inTest;
};

/// @param zero  true ratio at no load, with all relays open. Errors: as explain().
Result<Meaning> meaningOf(const ChannelModel& model, double span, units::Ratio zero);

/// What a correction claims: span, scale, and the strain at some levels. The readings stay as they are;
/// another circuit gives them another meaning, and this says by how much the claims are then off.
class Claims {
 public:
  /// @param levels  corrected strain shown (a transducer: fraction of the rated value).
  static Result<Claims> of(const Meaning& nominal, std::span<const units::Strain> levels);

  static constexpr std::size_t kSpan = 0, kScale = 1, kStrains = 2;  ///< outputs; one strain a level
  std::size_t outputs() const { return kStrains + levels_.size(); }

  /// y[kSpan]: span off the nominal one, in percent. y[kScale]: scale, 1 / (slope x span), in percent.
  /// y[kStrains + k]: true strain less the level, m/m. Shape: outputs().
  Result<void> evaluate(const Meaning& other, std::span<double> y) const;

  double slope_per_strain() const { return slope_; }  ///< dr/de in the test, at no load

 private:
  struct Level {
    double strain, ratio;
  };
  std::vector<Level> levels_;
  double span_ = 1, slope_ = 0;
};

}  // namespace shuntwright::calibration
