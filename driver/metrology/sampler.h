#pragma once

#include <span>
#include <vector>

#include "driver/metrology/model.h"

namespace shuntwright::metrology {

/// Draws the inputs of a model together (JCGM 101 6.4, JCGM 102).
///
/// Independent inputs are drawn each from its distribution. Correlated ones are drawn through correlated
/// normal scores: normal shapes become a joint normal, or a joint t when they share one finite number of
/// degrees of freedom; other shapes take their quantile of the score, whose correlation is first found such
/// that the values themselves have the stated one.
class Sampler {
 public:
  /// Errors: as check(); bad_use when two shapes cannot be correlated as strongly as stated.
  static Result<Sampler> of(const Model& model);

  /// Fills x, one value an input, in the order of Model::inputs.
  void draw(Random& random, std::span<double> x) const;

 private:
  struct Group {
    std::vector<std::size_t> members;
    Matrix root;               ///< score = root * independent standard normal values; empty for one member
    double sharedDegrees = 0;  ///< of a joint t; 0 when there is none
  };
  void drawTogether(const Group& group, Random& random, std::span<double> x) const;

  std::vector<Distribution> distributions_;
  std::vector<Group> groups_;
};

}  // namespace shuntwright::metrology
