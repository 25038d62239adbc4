#pragma once

#include <map>
#include <optional>
#include <string>
#include <vector>

#include "driver/calibration/channel_model.h"
#include "driver/metrology/matrix.h"
#include "driver/metrology/model.h"

namespace shuntwright::calibration {

/// What was read of a channel whose leads are not known, and what is known of everything else.
struct LeadReadings {
  ChannelModel nominal;                ///< the search starts at the mean of its leads
  std::vector<std::string> resistors;  ///< name of each shunt's resistor
  std::vector<units::Ratio> steps;     ///< one a shunt, as read; NaN: not measured
  std::vector<units::Ratio> noise;     ///< standard uncertainty of each step, above 0
  double noiseDegrees = metrology::kInfinity;
  std::optional<units::Ratio> zero;  ///< reading at no load
  units::Ratio zeroNoise;  ///< its standard uncertainty, the amplifier's own offset included; above 0
  std::vector<UncertainInput> known;  ///< all but the leads; those without uncertainty count as exact
  /// Each lead of the circuit, and how far it may be off the common resistance (half-width, rectangular).
  std::map<description::Terminal, units::Fraction> inequality;
};

/// Common lead resistance and amplifier's span from all steps of a channel at once.
///
/// Weighted non-linear least squares (Gauss-Newton) on the whole network. Unknown are the common resistance,
/// the span, the standing strain (unless the stated cause of unbalance rules one out), each lead's deviation,
/// and every known input, which also counts as observed at its mean with its uncertainty (GUM H.2.3, JCGM
/// 102): a resistor that several steps share makes them agree or disagree together.
///
/// Parameters are counted in standard uncertainties of what was known of them beforehand: value = mean + u t.
/// For the common resistance (the gauge's resistance) and the span (0.5) that is so wide that it decides
/// nothing.
class LeadFit {
 public:
  /// Errors: bad_use for other numbers of steps or noises than shunts, no step measured, a noise not above 0;
  /// those of bridge::ratio(); failed when the search does not settle.
  static Result<LeadFit> of(LeadReadings readings);

  const LeadReadings& readings() const { return readings_; }

  /// What the estimate rests on: the steps measured, the zero if there is one, then each parameter as it was
  /// known.
  const std::vector<metrology::Input>& rows() const { return rows_; }
  std::size_t dataRows() const { return rows_.size() - parameters(); }
  std::size_t parameters() const { return estimate_.size(); }

  static constexpr std::size_t kCommon = 0, kSpan = 1;
  std::size_t deviationAt(description::Terminal lead) const;  ///< index of a lead's deviation

  /// How much of the common resistance a lead has, as the rack states its leads.
  double shareOf(description::Terminal lead) const;

  const std::vector<double>& estimate() const { return estimate_; }    ///< t
  const metrology::Matrix& covariance() const { return covariance_; }  ///< of t
  /// d t / d row, in standard uncertainties of the row. Shape: parameters x rows.
  const metrology::Matrix& gain() const { return gain_; }
  double chiSquared() const { return chiSquared_; }

  double valueOf(std::size_t parameter, const std::vector<double>& t) const;  ///< in the parameter's unit
  double unitOf(std::size_t parameter) const;  ///< what t = 1 is, in the parameter's unit

  /// The channel at t: circuit and shunts with everything moved, the strain that stands, the span.
  struct Situation {
    ChannelModel model;
    units::Strain standing;
    double span = 1;
  };
  Situation situationAt(const std::vector<double>& t) const;

  /// The estimate if the rows had had these values (as rows(), in their units): for second opinions. Quick,
  /// since the gain is kept. Errors: those of bridge::ratio().
  Result<std::vector<double>> estimateFor(std::span<const double> observed) const;

  /// d step / d t of one more shunt, in V/V. Errors: those of bridge::ratio().
  Result<std::vector<double>> slopesOfStep(std::size_t shunt, const bridge::ShuntPath& path) const;

 private:
  Result<void> setUp();
  Result<void> search();
  Result<double> chiSquaredAt(const std::vector<double>& t) const;
  struct Move {
    std::vector<double> to;
    double chiSquared = 0;
  };
  Result<Move> moved(const std::vector<double>& by) const;
  std::size_t firstDeviation() const { return strains_ ? 3 : 2; }
  Result<std::vector<double>> predicted(const std::vector<double>& t) const;  ///< of the data rows
  Result<metrology::Matrix> slopes(const std::vector<double>& t) const;       ///< data rows x parameters

  LeadReadings readings_;
  std::vector<std::size_t> measured_;  ///< which shunts
  bool strains_ = false;               ///< the standing strain is a parameter
  std::map<description::Terminal, double> shares_;
  std::size_t firstKnown_ = 0;
  std::vector<metrology::Input> rows_;
  std::vector<double> estimate_;
  metrology::Matrix covariance_, gain_;
  double chiSquared_ = 0;  ///< of the estimate
};

}  // namespace shuntwright::calibration
