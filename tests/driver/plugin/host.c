/* A small host: loads the plug-in and runs the whole job through its table. Prints the record, then samples as
 * hexadecimal floats, so that a reader can compare them bit for bit. */
#include <dlfcn.h>
#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "driver/plugin/shuntwright_plugin.h"

static int windows_told = 0;

static void told(void* user, const shuntwright_progress* progress) {
  (void)user;
  windows_told = progress->windows_done;
}

#define CHECK(call)                                                                         \
  do {                                                                                      \
    int code = (call);                                                                      \
    if (code != SHUNTWRIGHT_OK) {                                                           \
      fprintf(stderr, "%s: %d: %s\n", #call, code, session ? api->last_error(session) : ""); \
      return 1;                                                                             \
    }                                                                                       \
  } while (0)

int main(int argc, char** argv) {
  if (argc != 5) return 2;
  void* library = dlopen(argv[1], RTLD_NOW | RTLD_LOCAL);
  if (!library) {
    fprintf(stderr, "%s\n", dlerror());
    return 1;
  }
  shuntwright_plugin_table_function get;
  *(void**)(&get) = dlsym(library, "shuntwright_plugin_table");
  if (!get || get(99) != NULL) return 1;
  const shuntwright_table* api = get(SHUNTWRIGHT_ABI_VERSION);
  if (!api || api->struct_size < sizeof(shuntwright_table)) return 1;

  shuntwright_session* session = NULL;
  shuntwright_open_options options;
  memset(&options, 0, sizeof options);
  options.struct_size = sizeof options;
  options.isolated = 1;
  options.rack_file = argv[2];
  options.replay_file = argv[3];
  options.seed = 1;
  CHECK(api->open(&options, &session));

  uint32_t count = 0;
  CHECK(api->channel_count(session, &count));
  const char* record = NULL;
  CHECK(api->calibrate(session, told, NULL, &record));
  printf("record %s\n", record);
  printf("windows %d\n", windows_told);
  for (uint32_t k = 0; k < count; ++k) {
    shuntwright_channel channel;
    memset(&channel, 0, sizeof channel);
    channel.struct_size = sizeof channel;
    CHECK(api->channel(session, k, &channel));
    printf("channel %s %s %d %s %d\n", channel.name, channel.device, channel.input, channel.unit, channel.calibrated);
  }

  CHECK(api->start(session));
  enum { FRAMES = 64, VALUES = 64 * 16 };
  int64_t time_ns[FRAMES];
  float ratio[VALUES], corrected[VALUES];
  uint8_t flags[VALUES];
  int wanted = atoi(argv[4]);
  while (wanted > 0) {
    shuntwright_block block;
    memset(&block, 0, sizeof block);
    block.struct_size = sizeof block;
    block.frames_capacity = FRAMES;
    block.values_capacity = VALUES;
    block.time_ns = time_ns;
    block.ratio = ratio;
    block.corrected = corrected;
    block.flags = flags;
    CHECK(api->read(session, 10000, &block));
    for (uint32_t f = 0; f < block.frames && wanted > 0; ++f, --wanted) {
      printf("sample %" PRId64, time_ns[f]);
      for (uint32_t k = 0; k < 4; ++k) {
        printf(" %a %a %u", (double)ratio[f * block.inputs + k], (double)corrected[f * block.inputs + k],
               flags[f * block.inputs + k]);
      }
      printf("\n");
    }
  }
  CHECK(api->stop(session));
  api->close(session);
  api->close(NULL);
  return 0;
}
