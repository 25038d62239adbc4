#include "driver/rack/prediction.h"

#include <cmath>
#include <cstdio>

#include "driver/rack/heating.h"

namespace shuntwright::rack {

using namespace units;

namespace {

std::string percent3(double value) {
  char text[32];
  std::snprintf(text, sizeof text, "%.3f %%", value);
  return text;
}

void checkLeadLoss(const description::Channel& channel, const description::Shunt& shunt, const bridge::ShuntStep& step,
                   description::Diagnostics& diagnostics) {
  if (channel.leadLoss != description::LeadLoss::in_span || step.carriesLeadLoss) return;
  if (step.strainPercentPerOhm == 0) return;  // no loss to carry
  diagnostics.error(shunt.place,
                    "the lead loss of channel \"" + channel.name + "\" is to go into the span, but the step of shunt \"" +
                        shunt.name + "\" does not carry it: the step changes by " + percent3(step.stepPercentPerOhm) +
                        " per ohm of lead, the response to strain by " + percent3(step.strainPercentPerOhm),
                    "shunt another arm (in a 3-wire quarter bridge the completion resistor carries it), or state the lead "
                    "resistance and use lead_loss = \"in prediction\"");
}

/// A maker's gauge factor is a straight line through a curve: metal gauges depart from it by about 1 % at 20 000
/// microstrain (common practice, no source). No shunt sees that.
void warnOfLargeStrain(const description::Channel& channel, description::Diagnostics& diagnostics) {
  constexpr Strain kLarge = 10000.0 * microstrain;
  if (channel.transducer || !channel.expected || *channel.expected < kLarge) return;
  diagnostics.warning(channel.place,
                      "channel \"" + channel.name +
                          "\" expects more than 10000 microstrain, where gauges themselves depart from their gauge factor "
                          "(by about 1 % at 20000)",
                      "the correction is exact for the circuit only; use a factor that was found at such strains");
}

void checkCertificateShunt(const description::Channel& channel, description::Diagnostics& diagnostics) {
  if (!channel.transducer || !channel.transducer->certificateShunt) return;
  const auto arm = bridge::armOf(*channel.transducer);
  if (!arm) {
    diagnostics.error(channel.place, "channel \"" + channel.name + "\": " + arm.error().message, arm.error().remedy);
    return;
  }
  const double off = *arm / channel.transducer->outputResistance - 1;
  if (std::abs(off) < 0.05) return;
  diagnostics.warning(channel.place,
                      "channel \"" + channel.name + "\": the certificate's shunt sees arms that are " +
                          percent3(100 * off) + " off the output resistance",
                      "check the resistor, the terminals and the step in the certificate");
}

}  // namespace

std::vector<ChannelPrediction> predict(const description::Rack& rack, description::Diagnostics& diagnostics) {
  std::vector<ChannelPrediction> out;
  for (const auto& channel : rack.channels) {
    ChannelPrediction prediction;
    prediction.name = channel.name;
    prediction.circuit = description::name(channel.circuit);
    if (channel.transducer) {
      prediction.transducer = true;
      prediction.unit = channel.transducer->unit;
      prediction.unitsPerStrain = channel.transducer->ratedValue;
    }
    warnOfLargeStrain(channel, diagnostics);
    checkCertificateShunt(channel, diagnostics);
    const bridge::Circuit circuit = bridge::circuitOf(rack, channel);
    if (auto zero = bridge::ratio(circuit, {}); !zero) {
      diagnostics.error(channel.place, "channel \"" + channel.name + "\" makes no bridge: " + zero.error().message,
                        zero.error().remedy);
      continue;
    }
    for (const auto& shunt : channel.shunts) {
      auto step = bridge::predictStep(circuit, {}, bridge::pathOf(rack, shunt));
      if (!step) {
        diagnostics.error(shunt.place, "shunt \"" + shunt.name + "\" of channel \"" + channel.name +
                          "\" cannot be predicted: " + step.error().message, step.error().remedy);
        continue;
      }
      if (step->step == 0.0 * volt_per_volt) {
        diagnostics.error(shunt.place, "shunt \"" + shunt.name + "\" of channel \"" + channel.name +
                          "\" changes nothing", "put it across an arm of the bridge");
      }
      checkLeadLoss(channel, shunt, *step, diagnostics);
      prediction.shunts.push_back({shunt.name, *step});
    }
    out.push_back(std::move(prediction));
  }
  warnOfHeating(rack, diagnostics);
  return out;
}

}  // namespace shuntwright::rack
