/* See tramline_board.h. SPDX-License-Identifier: Apache-2.0 */
#include "tramline_board.h"

#include <string.h>

static uint8_t *put(uint8_t *to, uint32_t value, int bytes) {
  for (int i = 0; i < bytes; ++i) *to++ = (uint8_t)(value >> (8 * i));
  return to;
}

static uint8_t *put_text(uint8_t *to, const char *text, size_t bytes) {
  size_t length = 0;
  while (text && length < bytes && text[length]) ++length;
  memset(to, 0, bytes);
  if (length) memcpy(to, text, length);
  return to + bytes;
}

static uint8_t *put_float(uint8_t *to, float value) {
  uint32_t bits;
  memcpy(&bits, &value, sizeof bits);
  return put(to, bits, 4);
}

/* CRC-32 bit by bit; a board that is short of time replaces it by its hardware or a table. */
static uint32_t crc32(const uint8_t *from, size_t bytes) {
  uint32_t crc = 0xFFFFFFFFu;
  while (bytes--) {
    crc ^= *from++;
    for (int bit = 0; bit < 8; ++bit) crc = (crc >> 1) ^ (crc & 1u ? 0xEDB88320u : 0u);
  }
  return ~crc;
}

static size_t frame(struct tb_board *board, uint8_t kind, uint8_t *out, size_t payload) {
  uint8_t *at = put(out, 0x4DA7u, 2);
  at = put(at, 1, 1);
  at = put(at, kind, 1);
  at = put(at, (uint32_t)payload, 2);
  put(at, board->sequence++, 2);
  put(out + 8 + payload, crc32(out + 2, 6 + payload), 4);
  return payload + TB_FRAME_EXTRA;
}

size_t tb_hello(struct tb_board *board, uint8_t *out, size_t room) {
  if (board->channels < 1 || board->channels > TB_MOST_CHANNELS || board->bytes < 2 || board->bytes > 4) return 0;
  const size_t payload = TB_HELLO_BYTES + (size_t)TB_CHANNEL_BYTES * board->channels;
  if (room < payload + TB_FRAME_EXTRA) return 0;
  uint8_t *at = out + 8;
  at = put(at, board->channels, 1);
  at = put(at, board->bytes - 1u, 1);
  at = put(at, 0, 2);
  at = put(at, board->rate_mhz, 4);
  at = put(at, board->begin, 4);
  at = put(at, board->calibrated_day, 4);
  at = put_text(at, board->type, 32);
  at = put_text(at, board->serial, 16);
  for (int c = 0; c < board->channels; ++c) {
    const struct tb_channel *channel = &board->channel[c];
    at = put_text(at, channel->name, 8);
    at = put_float(at, channel->volts_per_count);
    at = put_float(at, channel->offset_counts);
    at = put(at, (uint32_t)channel->lowest, 4);
    at = put(at, (uint32_t)channel->highest, 4);
  }
  return frame(board, 1, out, payload);
}

size_t tb_samples(struct tb_board *board, uint32_t first, const int32_t *counts, uint16_t frames, uint8_t over_range, int lost,
                  uint8_t *out, size_t room) {
  const size_t payload = 8 + (size_t)frames * board->channels * board->bytes;
  if (payload > TB_MOST_PAYLOAD || room < payload + TB_FRAME_EXTRA) return 0;
  uint8_t *at = put(out + 8, first, 4);
  at = put(at, frames, 2);
  at = put(at, over_range, 1);
  at = put(at, lost ? 1 : 0, 1);
  const size_t values = (size_t)frames * board->channels;
  for (size_t i = 0; i < values; ++i) at = put(at, (uint32_t)counts[i], board->bytes);
  return frame(board, 2, out, payload);
}
