#include "driver/plugin/shuntwright_plugin.h"

#include <algorithm>
#include <cstring>
#include <exception>
#include <memory>
#include <string>

#include "driver/calibration/record_json.h"
#include "driver/plugin/session.h"

using shuntwright::Error;
using shuntwright::ErrorCode;
using shuntwright::Result;

struct shuntwright_session {
  std::unique_ptr<shuntwright::plugin::Session> session;
  std::string error;
  std::string text;  ///< given to the host, until the next call
};

namespace {

int codeOf(ErrorCode code) {
  switch (code) {
    case ErrorCode::bad_use:
    case ErrorCode::not_found: return SHUNTWRIGHT_BAD_USE;
    case ErrorCode::bad_file: return SHUNTWRIGHT_BAD_FILE;
    case ErrorCode::refused: return SHUNTWRIGHT_REFUSED;
    case ErrorCode::timeout: return SHUNTWRIGHT_TIMEOUT;
    case ErrorCode::io:
    case ErrorCode::bad_answer:
    case ErrorCode::device_error: return SHUNTWRIGHT_DEVICE;
    case ErrorCode::cancelled: return SHUNTWRIGHT_CANCELLED;
  }
  return SHUNTWRIGHT_INTERNAL;
}

/// Runs a call so that no exception crosses into C.
template <class Body>
int guarded(shuntwright_session* handle, Body body) {
  if (!handle || !handle->session) return SHUNTWRIGHT_BAD_USE;
  try {
    handle->error.clear();
    Result<void> done = body(*handle->session);
    if (done) return SHUNTWRIGHT_OK;
    handle->error = done.error().text();
    // A device that answers nothing is a device's failure; only read() times out.
    const int code = codeOf(done.error().code);
    return code == SHUNTWRIGHT_TIMEOUT ? SHUNTWRIGHT_DEVICE : code;
  } catch (const std::exception& e) {
    handle->error = e.what();
  } catch (...) {
    handle->error = "unknown failure";
  }
  return SHUNTWRIGHT_INTERNAL;
}

/// The host's struct as far as the host knows it, the rest 0; and back, no further than that.
template <class Struct>
Struct known(const Struct& given) {
  Struct all{};
  std::memcpy(&all, &given, std::min<std::size_t>(given.struct_size, sizeof all));
  return all;
}
template <class Struct>
void give(const Struct& all, Struct& given) {
  std::memcpy(&given, &all, std::min<std::size_t>(given.struct_size, sizeof all));
}

std::string orEmpty(const char* text) { return text ? text : ""; }

int openSession(const shuntwright_open_options* given, shuntwright_session** session) {
  if (!given || !session || given->struct_size < offsetof(shuntwright_open_options, state_folder)) {
    return SHUNTWRIGHT_BAD_USE;
  }
  shuntwright_open_options options{};
  std::memcpy(&options, given, std::min<std::size_t>(given->struct_size, sizeof options));
  try {
    auto handle = std::make_unique<shuntwright_session>();
    shuntwright::plugin::SessionOptions wanted;
    wanted.isolated = options.isolated != 0;
    wanted.rackFile = orEmpty(options.rack_file);
    wanted.stateFolder = orEmpty(options.state_folder);
    wanted.lockFolder = orEmpty(options.lock_folder);
    wanted.replayFile = orEmpty(options.replay_file);
    wanted.seed = options.seed;
    handle->session = std::make_unique<shuntwright::plugin::Session>(std::move(wanted));
    *session = handle.release();
  } catch (...) {
    return SHUNTWRIGHT_INTERNAL;
  }
  return guarded(*session, [](auto& s) { return s.open(); });
}

const char* lastError(const shuntwright_session* session) { return session ? session->error.c_str() : "no session"; }

int channelCount(shuntwright_session* session, uint32_t* count) {
  if (!count) return SHUNTWRIGHT_BAD_USE;
  return guarded(session, [&](auto& s) -> Result<void> {
    if (!s.rack()) return shuntwright::fail(ErrorCode::bad_use, "the session is not open");
    *count = static_cast<uint32_t>(s.rack()->channels.size());
    return {};
  });
}

int channelAt(shuntwright_session* session, uint32_t index, shuntwright_channel* out) {
  if (!out || out->struct_size < sizeof out->struct_size) return SHUNTWRIGHT_BAD_USE;
  return guarded(session, [&](auto& s) -> Result<void> {
    auto all = known(*out);
    if (!s.rack() || index >= s.rack()->channels.size()) {
      return shuntwright::fail(ErrorCode::bad_use, "the rack has no channel number " + std::to_string(index));
    }
    const auto& channel = s.rack()->channels[index];
    const auto* result = s.record() ? s.record()->channel(channel.name) : nullptr;
    all.name = channel.name.c_str();
    all.device = channel.device.c_str();
    all.input = channel.input;
    all.unit = result ? result->unit.c_str() : "";
    all.calibrated = result && result->verdict == shuntwright::calibration::Verdict::pass ? 1 : 0;
    give(all, *out);
    return {};
  });
}

int calibrate(shuntwright_session* session, shuntwright_progress_callback callback, void* user,
              const char** record_json) {
  return guarded(session, [&](auto& s) -> Result<void> {
    const auto progress = [&](const shuntwright::calibration::Progress& p) {
      if (!callback) return;
      shuntwright_progress told{};
      told.struct_size = sizeof told;
      told.closed = p.closed ? 1 : 0;
      told.channel = p.channel.c_str();
      told.shunt = p.shunt.c_str();
      told.windows_done = p.windowsDone;
      told.windows_planned = p.windowsPlanned;
      told.reading_V_per_V = p.reading.in(shuntwright::units::volt_per_volt);
      callback(user, &told);
    };
    auto done = s.calibrate(progress, session->text);
    if (done && record_json) *record_json = session->text.c_str();
    return done;
  });
}

int useCalibration(shuntwright_session* session, const char* record_json) {
  if (!record_json) return SHUNTWRIGHT_BAD_USE;
  return guarded(session, [&](auto& s) -> Result<void> {
    auto record = shuntwright::calibration::parseRecordJson(record_json, "use_calibration");
    if (!record) return std::unexpected(std::move(record.error()));
    return s.use(std::move(*record));
  });
}

int startReading(shuntwright_session* session) {
  return guarded(session, [](auto& s) { return s.start(); });
}

int readBlock(shuntwright_session* session, uint32_t timeout_ms, shuntwright_block* given) {
  if (!given || given->struct_size < sizeof given->struct_size) return SHUNTWRIGHT_BAD_USE;
  if (!session || !session->session) return SHUNTWRIGHT_BAD_USE;
  shuntwright_block all = known(*given);
  shuntwright_block* const out = &all;
  bool timedOut = false;
  const int code = guarded(session, [&](auto& s) -> Result<void> {
    out->frames = 0;
    out->lost = out->damaged = 0;
    out->device = "";
    auto got = s.next(timeout_ms);
    if (!got) {
      timedOut = got.error().code == ErrorCode::timeout;
      return std::unexpected(std::move(got.error()));
    }
    auto& block = **got;
    const std::size_t inputs = block.samples.inputs, left = block.samples.frames() - block.taken;
    std::size_t frames = std::min<std::size_t>(left, out->frames_capacity);
    if (out->ratio || out->corrected || out->flags) frames = std::min(frames, out->values_capacity / std::max<std::size_t>(1, inputs));
    if (frames == 0 && left > 0) {
      return shuntwright::fail(ErrorCode::bad_use, "the arrays have no room for one frame of " + std::to_string(inputs) + " inputs");
    }
    const std::size_t from = block.taken, values = frames * inputs;
    for (std::size_t f = 0; out->time_ns && f < frames; ++f) {
      out->time_ns[f] = block.samples.time[from + f].time_since_epoch().count();
    }
    if (out->ratio) std::copy_n(block.samples.ratio.data() + from * inputs, values, out->ratio);
    if (out->corrected) std::copy_n(block.corrected.data() + from * inputs, values, out->corrected);
    if (out->flags) std::copy_n(block.samples.flags.data() + from * inputs, values, out->flags);
    out->frames = static_cast<uint32_t>(frames);
    out->inputs = static_cast<uint32_t>(inputs);
    out->device = block.device.c_str();
    out->lost = std::exchange(block.lost, 0);
    out->damaged = std::exchange(block.damaged, 0);
    block.taken += frames;
    return {};
  });
  give(all, *given);
  return timedOut ? SHUNTWRIGHT_TIMEOUT : code;
}

int stopReading(shuntwright_session* session) {
  return guarded(session, [](auto& s) { return s.stop(); });
}

int releaseRelays(shuntwright_session* session) {
  return guarded(session, [](auto& s) { return s.release(); });
}

/// Beside another call: touches nothing of the handle that one may change.
int cancelCall(shuntwright_session* session) {
  if (!session || !session->session) return SHUNTWRIGHT_BAD_USE;
  try {
    session->session->cancel();
    return SHUNTWRIGHT_OK;
  } catch (...) {
    return SHUNTWRIGHT_INTERNAL;
  }
}

void closeSession(shuntwright_session* session) {
  try {
    delete session;
  } catch (...) {
    // Nothing can be told any more.
  }
}

const shuntwright_table kTable = {sizeof(shuntwright_table), SHUNTWRIGHT_ABI_VERSION, openSession, lastError,
                                  channelCount,              channelAt,               calibrate,   useCalibration,
                                  startReading,              readBlock,               stopReading, releaseRelays,
                                  closeSession,              cancelCall};

}  // namespace

extern "C" SHUNTWRIGHT_EXPORT const shuntwright_table* shuntwright_plugin_table(uint32_t abi_version) {
  return abi_version == SHUNTWRIGHT_ABI_VERSION ? &kTable : nullptr;
}
