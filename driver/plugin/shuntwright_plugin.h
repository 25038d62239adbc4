/* Shuntwright as a plug-in: what a host program loads and calls. Plain C11.
 *
 * Conventions
 *  1. One symbol is exported: shuntwright_plugin_table. Everything else is reached through the table it gives.
 *  2. Structs begin with struct_size, which the host sets to sizeof; new fields are only ever appended. A struct
 *     smaller than the plug-in knows is taken as one whose further fields are 0.
 *  3. A session is an opaque handle. Its devices run on a thread of the plug-in; every call of the table may come
 *     from any thread of the host, one at a time for each session (cancel alone comes between), and blocks until it
 *     is done. Callbacks come on the thread that made the call. No signal handler is ever installed.
 *  4. A call returns SHUNTWRIGHT_OK or a code below 0; last_error then says in words what is wrong, where, and how
 *     to mend it. Text is UTF-8 and ends with a zero; text that a call gives belongs to the session and stays until
 *     its next call.
 *  5. Times are UTC in nanoseconds since 1970-01-01. Ratios are V/V. Corrected values are in the channel's unit.
 *  6. Whatever ends a calibration, relays are open afterwards; closing a session opens them too.
 *
 * A shunt on a channel that closes a load-control loop is read as load and moves the actuator. The host has to ask
 * somebody whether the load path is isolated; without `isolated` nothing is written that can change a reading.
 */
#ifndef SHUNTWRIGHT_PLUGIN_H
#define SHUNTWRIGHT_PLUGIN_H

#include <stddef.h>
#include <stdint.h>

#ifdef __cplusplus
extern "C" {
#endif

#define SHUNTWRIGHT_ABI_VERSION 1u

enum {
  SHUNTWRIGHT_OK = 0,
  SHUNTWRIGHT_BAD_USE = -1,   /* wrong argument, or a call out of turn */
  SHUNTWRIGHT_BAD_FILE = -2,  /* the rack, a profile or a record says something wrong */
  SHUNTWRIGHT_DEVICE = -3,    /* a device or the system failed */
  SHUNTWRIGHT_REFUSED = -4,   /* not confirmed, locked, exists already */
  SHUNTWRIGHT_TIMEOUT = -5,   /* nothing came in time (read) */
  SHUNTWRIGHT_INTERNAL = -6,
  SHUNTWRIGHT_CANCELLED = -7  /* by cancel (calibrate) */
};

/* Flags of a sample. */
enum {
  SHUNTWRIGHT_SATURATED = 1,
  SHUNTWRIGHT_MISSING = 2,    /* the ratio is NaN */
  SHUNTWRIGHT_SWITCHING = 4   /* a relay was closed or settling */
};

typedef struct shuntwright_session shuntwright_session;

typedef struct {
  uint32_t struct_size;
  int32_t isolated;          /* not 0: the load path is isolated, somebody said so */
  const char* rack_file;     /* TOML */
  const char* state_folder;  /* of the relay journal, an existing folder; NULL: none is kept, and nobody can tell
                                after a crash which relays may be closed */
  const char* lock_folder;   /* of port locks; NULL: none are taken, and nothing keeps another program out */
  const char* replay_file;   /* NULL, or a wire trace to play in place of the devices, in virtual time */
  uint64_t seed;             /* of record ids; 0: from the time */
} shuntwright_open_options;

typedef struct {
  uint32_t struct_size;
  int32_t input;             /* as numbered on the device */
  const char* name;
  const char* device;
  const char* unit;          /* of corrected values, once a calibration is in force; else "" */
  int32_t calibrated;        /* passed, with the calibration in force */
} shuntwright_channel;

typedef struct {
  uint32_t struct_size;
  int32_t closed;            /* the shunt's relay, in the window just taken */
  const char* channel;
  const char* shunt;         /* "" for a zero reading */
  int32_t windows_done;
  int32_t windows_planned;
  double reading_V_per_V;
} shuntwright_progress;

typedef void (*shuntwright_progress_callback)(void* user, const shuntwright_progress* progress);

/* Samples of one device. The host gives the arrays and how many frames they have room for; `inputs` of the device
 * are side by side: value k of frame f is at [f * inputs + k]. Arrays that are NULL are not filled. */
typedef struct {
  uint32_t struct_size;
  uint32_t frames_capacity;  /* in: frames */
  uint32_t values_capacity;  /* in: frames x inputs that ratio, corrected and flags have room for */
  uint32_t frames;           /* out */
  uint32_t inputs;           /* out */
  uint32_t reserved;
  const char* device;        /* out */
  int64_t* time_ns;
  float* ratio;
  float* corrected;
  uint8_t* flags;
  uint64_t lost;             /* out: frames lost just before these, on the wire or because nobody read; may come with
                                no frame at the end */
  uint64_t damaged;          /* out: lines from the device just before these that could not be read */
} shuntwright_block;

typedef struct {
  uint32_t struct_size;
  uint32_t abi_version;

  /* Loads the rack, opens and identifies every device. *session is set even when it fails, for last_error; close it
   * all the same. */
  int (*open)(const shuntwright_open_options* options, shuntwright_session** session);
  const char* (*last_error)(const shuntwright_session* session);

  int (*channel_count)(shuntwright_session* session, uint32_t* count);
  int (*channel)(shuntwright_session* session, uint32_t index, shuntwright_channel* channel);

  /* The shunt sequence for the whole rack. *record_json is the record; it is in force afterwards. */
  int (*calibrate)(shuntwright_session* session, shuntwright_progress_callback callback, void* user,
                   const char** record_json);
  /* Puts a record in force that calibrate (or the program) gave. */
  int (*use_calibration)(shuntwright_session* session, const char* record_json);

  int (*start)(shuntwright_session* session);
  /* Waits up to timeout_ms for samples of any device. */
  int (*read)(shuntwright_session* session, uint32_t timeout_ms, shuntwright_block* block);
  /* What has come by then can still be read, until read says BAD_USE or start is called. */
  int (*stop)(shuntwright_session* session);

  int (*release)(shuntwright_session* session); /* opens every relay */
  void (*close)(shuntwright_session* session);  /* NULL is ignored */

  /* From any thread, and from within the progress callback, but not beside open or close: a calibration under way opens its relays and ends with
   * SHUNTWRIGHT_CANCELLED; what was in force stays. Without one nothing happens. */
  int (*cancel)(shuntwright_session* session);
} shuntwright_table;

#if defined(_WIN32)
#define SHUNTWRIGHT_EXPORT __declspec(dllexport)
#else
#define SHUNTWRIGHT_EXPORT __attribute__((visibility("default")))
#endif

/* The table, or NULL when the plug-in does not know this version. */
SHUNTWRIGHT_EXPORT const shuntwright_table* shuntwright_plugin_table(uint32_t abi_version);
typedef const shuntwright_table* (*shuntwright_plugin_table_function)(uint32_t abi_version);

#ifdef __cplusplus
}
#endif

#endif
