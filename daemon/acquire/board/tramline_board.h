/* Writes board frames, version 1 (BOARD-FRAMES.md). Plain C99, no heap, no library: take both files into a board's
 * firmware. Not reentrant: one struct tb_board, one caller. SPDX-License-Identifier: Apache-2.0 */
#ifndef TRAMLINE_BOARD_H
#define TRAMLINE_BOARD_H

#include <stddef.h>
#include <stdint.h>

#ifdef __cplusplus
extern "C" {
#endif

enum { TB_MOST_CHANNELS = 8, TB_MOST_PAYLOAD = 4096, TB_FRAME_EXTRA = 12, TB_HELLO_BYTES = 64, TB_CHANNEL_BYTES = 24 };

struct tb_channel {
  const char *name;        /* up to 8 bytes */
  float volts_per_count;   /* at the mains terminals */
  float offset_counts;     /* volts = (count + offset) * volts_per_count */
  int32_t lowest, highest; /* a count at or beyond these is over-range */
};

struct tb_board {
  uint8_t channels;        /* 1 to 8 */
  uint8_t bytes;           /* of a sample: 2, 3 or 4 */
  uint32_t rate_mhz;       /* samples a second of each channel, times 1000 */
  uint32_t begin;          /* anything that differs from the start before */
  uint32_t calibrated_day; /* days since 1970-01-01; 0: not calibrated */
  const char *type;        /* up to 32 bytes */
  const char *serial;      /* up to 16 bytes */
  struct tb_channel channel[TB_MOST_CHANNELS];
  uint16_t sequence;       /* leave 0 */
};

/* Writes a hello to `out` and returns its length; 0 if it does not fit into `room` or the board is described wrongly. Send one a second. */
size_t tb_hello(struct tb_board *board, uint8_t *out, size_t room);

/* Writes `frames` instants of samples, `counts[i * channels + c]`, the first being sample `first` since the start; `over_range` has bit c set where
 * channel c was; `lost` is not 0 if samples before `first` were lost. Returns the length; 0 if it does not fit. */
size_t tb_samples(struct tb_board *board, uint32_t first, const int32_t *counts, uint16_t frames, uint8_t over_range, int lost,
                  uint8_t *out, size_t room);

#ifdef __cplusplus
}
#endif
#endif
