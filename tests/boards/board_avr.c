/* Runs the emitted code on an AVR for a sample of positions that the host draws in the same way.
 * GPIOR1 carries bytes out, GPIOR0 marks: 1 and 2 around encoding, 3 and 4 around decoding, 5 and 6
 * around nothing, 7 at the end. */
#include <avr/io.h>
#include <avr/sleep.h>
#include <avr/interrupt.h>

#include "camera.h"
#include "drive.h"

#ifndef SAMPLES
#define SAMPLES 5000
#endif

#define BARRIER() __asm__ volatile("" ::: "memory")

static t_codes codes[T_OBJECTS];
static uint8_t report[T_REPORT_BYTES];
static t_line line;
static t_place place;
static volatile int16_t u_sub, v_sub;

__attribute__((noinline)) static void encode_all(void) {
  uint8_t i;
  for (i = 0; i < T_OBJECTS; ++i) codes[i] = t_encode(i, u_sub, v_sub);
  t_report(codes, report);
}

__attribute__((noinline)) static uint8_t decode_all(uint8_t byte) {
  return t_take(&line, byte) && t_decode(t_codes_of(&line, 0), &place);
}

int main(void) {
  uint32_t state = 1;
  uint16_t n;
  uint8_t i;
  for (n = 0; n < SAMPLES; ++n) {
    state = state * 1664525UL + 1013904223UL;
    u_sub = (int16_t)((state >> 16) % (8UL * T_WIDTH_PX));
    state = state * 1664525UL + 1013904223UL;
    v_sub = (int16_t)((state >> 16) % (8UL * T_HEIGHT_PX));
    BARRIER();
    GPIOR0 = 5;
    GPIOR0 = 6;
    GPIOR0 = 1;
    BARRIER();
    encode_all();
    BARRIER();
    GPIOR0 = 2;
    BARRIER();
    for (i = 0; i < T_REPORT_BYTES; ++i) GPIOR1 = report[i];
    place.range = 0;
    place.bearing_cdeg = 0;
    for (i = 0; i < T_REPORT_BYTES - 1u; ++i) (void)decode_all(report[i]);
    BARRIER();
    GPIOR0 = 3;
    BARRIER();
    (void)decode_all(report[T_REPORT_BYTES - 1]);
    BARRIER();
    GPIOR0 = 4;
    BARRIER();
    GPIOR1 = (uint8_t)place.range;
    GPIOR1 = (uint8_t)(place.range >> 8);
    GPIOR1 = (uint8_t)(uint16_t)place.bearing_cdeg;
    GPIOR1 = (uint8_t)((uint16_t)place.bearing_cdeg >> 8);
  }
  GPIOR0 = 7;
  cli();
  sleep_enable();
  for (;;) sleep_cpu();
}
