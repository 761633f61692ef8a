#include "tools/firmware/emit.h"
#include "tools/firmware/text.h"

namespace rondel::firmware {

std::string receiver_header(const std::string& prefix) {
  const std::string p = identifier(prefix);
  return fill(
      R"(/* Takes new tables over a serial line ('rondel send') and keeps the old ones unless everything
 * about the new ones checks out. Made by rondel; not to be edited.
 *
 * Set up a @p@_receiver with your two callbacks and the rest zero, feed every byte that arrives to
 * @p@_receive, and let `write` put blocks into a spare place. When @p@_receive returns 1 the spare
 * place holds a whole, checked image: use it from then on. Before that it must not be used.
 */
#ifndef @P@_RECEIVER_H
#define @P@_RECEIVER_H

#include <stdint.h>

#define @P@_BLOCK 64u /* bytes of an image in a frame, at most */

typedef struct {
  void (*write)(uint32_t offset, const uint8_t *bytes, uint8_t count); /* into the spare place */
  void (*send)(uint8_t byte);
  uint32_t length, crc, identity; /* of the image as announced */
  uint32_t running;               /* CRC-32 of the blocks so far */
  uint32_t inside;                /* identity as read from the image */
  uint16_t wanted;                /* next block */
  uint8_t busy, accepted, overflow;
  uint8_t held; /* bytes of the frame so far, still stuffed */
  uint8_t frame[@P@_BLOCK + 12u];
} @p@_receiver;

static uint16_t @p@_crc16(uint16_t crc, uint8_t byte) {
  uint8_t bit;
  crc = (uint16_t)(crc ^ (uint16_t)((uint16_t)byte << 8));
  for (bit = 0; bit < 8u; ++bit) {
    crc = (uint16_t)((crc & 0x8000u) ? (uint16_t)(crc << 1) ^ 0x1021u : (uint16_t)(crc << 1));
  }
  return crc;
}

static uint32_t @p@_crc32(uint32_t crc, uint8_t byte) {
  uint8_t bit;
  crc ^= byte;
  for (bit = 0; bit < 8u; ++bit) crc = (crc & 1u) ? (crc >> 1) ^ 0xEDB88320UL : crc >> 1;
  return crc;
}

static uint32_t @p@_word(const uint8_t *at) {
  return (uint32_t)at[0] | ((uint32_t)at[1] << 8) | ((uint32_t)at[2] << 16) | ((uint32_t)at[3] << 24);
}

/* Sends kind, number and CRC-16, stuffed. */
static void @p@_answer(@p@_receiver *r, uint8_t kind, uint16_t number) {
  uint8_t plain[5];
  uint8_t i, k;
  uint16_t crc = 0xFFFFu;
  plain[0] = kind;
  plain[1] = (uint8_t)number;
  plain[2] = (uint8_t)(number >> 8);
  for (i = 0; i < 3u; ++i) crc = @p@_crc16(crc, plain[i]);
  plain[3] = (uint8_t)crc;
  plain[4] = (uint8_t)(crc >> 8);
  for (i = 0; i <= 5u; i = (uint8_t)(k + 1u)) {
    for (k = i; k < 5u && plain[k] != 0u; ++k) {
    }
    r->send((uint8_t)(k - i + 1));
    for (; i < k; ++i) r->send(plain[i]);
  }
  r->send(0);
}

/* Undoes the stuffing in place; the count of plain bytes, 0 where it is no frame. */
static uint8_t @p@_unstuff(uint8_t *bytes, uint8_t count) {
  uint8_t from = 0, to = 0;
  while (from < count) {
    uint8_t run = bytes[from++];
    if (run == 0u || from + run - 1 > count) return 0;
    while (--run != 0u) bytes[to++] = bytes[from++];
    if (from < count) bytes[to++] = 0;
  }
  return to;
}

/* One whole frame. */
static uint8_t @p@_frame(@p@_receiver *r) {
  const uint8_t count = @p@_unstuff(r->frame, r->held);
  const uint8_t *body = r->frame + 3;
  const uint32_t sum = (uint32_t)(r->running ^ 0xFFFFFFFFUL);
  uint16_t crc = 0xFFFFu, number;
  uint8_t i, size;
  if (count < 5u) return 0;
  for (i = 0; i + 2u < count; ++i) crc = @p@_crc16(crc, r->frame[i]);
  if (r->frame[count - 2u] != (uint8_t)crc || r->frame[count - 1u] != (uint8_t)(crc >> 8)) return 0;
  number = (uint16_t)(r->frame[1] | (uint16_t)((uint16_t)r->frame[2] << 8));
  size = (uint8_t)(count - 5u);
  if (r->frame[0] == 'B' && size == 12u) {
    /* The same image again: go on where it was cut off. */
    if (!r->busy || r->length != @p@_word(body) || r->crc != @p@_word(body + 4) ||
        r->identity != @p@_word(body + 8)) {
      r->length = @p@_word(body);
      r->crc = @p@_word(body + 4);
      r->identity = @p@_word(body + 8);
      r->running = 0xFFFFFFFFUL;
      r->inside = 0;
      r->wanted = 0;
      r->busy = 1;
      r->accepted = 0;
    }
    @p@_answer(r, 'B', r->wanted);
  } else if (r->frame[0] == 'D' && r->busy && size != 0u && size <= @P@_BLOCK) {
    const uint32_t offset = (uint32_t)number * @P@_BLOCK;
    if (number == r->wanted && offset < r->length &&
        size == (r->length - offset < @P@_BLOCK ? r->length - offset : @P@_BLOCK)) {
      for (i = 0; i < size; ++i) r->running = @p@_crc32(r->running, body[i]);
      if (number == 0u && size >= 16u) r->inside = @p@_word(body + 12);
      r->write(offset, body, size);
      ++r->wanted;
    }
    @p@_answer(r, 'A', r->wanted);
  } else if (r->frame[0] == 'E' && size == 8u) {
    const uint8_t same = r->crc == @p@_word(body) && r->identity == @p@_word(body + 4);
    if (r->accepted && same) {
      @p@_answer(r, 'F', 1); /* our answer got lost */
    } else if (r->busy && same && (uint32_t)r->wanted * @P@_BLOCK >= r->length &&
               sum == r->crc && r->inside == r->identity) {
      r->busy = 0;
      r->accepted = 1;
      @p@_answer(r, 'F', 1);
      return 1;
    } else {
      r->busy = 0; /* from the beginning */
      @p@_answer(r, 'F', 0);
    }
  }
  return 0;
}

/* Takes one byte from the line; 1 when with it a new image is whole and checked. */
static uint8_t @p@_receive(@p@_receiver *r, uint8_t byte) {
  uint8_t done = 0;
  if (byte != 0u) {
    if (r->held < sizeof r->frame) {
      r->frame[r->held++] = byte;
    } else {
      r->overflow = 1;
    }
    return 0;
  }
  if (!r->overflow && r->held != 0u) done = @p@_frame(r);
  r->held = 0;
  r->overflow = 0;
  return done;
}

#endif /* @P@_RECEIVER_H */
)",
      {{"p", p}, {"P", upper(p)}});
}

}  // namespace rondel::firmware
