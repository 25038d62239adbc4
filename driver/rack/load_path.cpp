#include "driver/rack/load_path.h"

namespace shuntwright::rack {
namespace {

std::string listed(const std::vector<std::string>& names) {
  std::string out;
  for (const auto& name : names) out += (out.empty() ? "" : ", ") + name;
  return out;
}

}  // namespace

std::vector<std::string> loadControlChannels(const description::Rack& rack) {
  std::vector<std::string> names;
  for (const auto& channel : rack.channels) {
    if (channel.loadControl) names.push_back(channel.name);
  }
  return names;
}

std::string loadPathQuestion(const description::Rack& rack) {
  std::string text =
      "Shunting a channel that closes a load-control loop is read as load and moves the actuator.\n";
  const auto marked = loadControlChannels(rack);
  text += marked.empty() ? "The rack marks no channel as load control.\n"
                         : "Marked as load control: " + listed(marked) + ".\n";
  return text +
         "Is the load path isolated (hydraulics off or channels released), and nobody in it? Type yes: ";
}

Result<LoadPathPermit> confirmLoadPath(const description::Rack& rack, bool isolated, std::string by) {
  if (isolated) return LoadPathPermit(std::move(by));
  const auto marked = loadControlChannels(rack);
  return fail(ErrorCode::refused,
              "nobody has confirmed that the load path is isolated" +
                  (marked.empty() ? std::string() : " (load control: " + listed(marked) + ")"),
              rack.file,
              "isolate the load path, then confirm with --isolated; a shunt on a load-control channel is read "
              "as load and moves the actuator");
}

}  // namespace shuntwright::rack
