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
