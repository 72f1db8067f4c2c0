/* Text to the emulator's standard output, and its exit code. */
#ifndef SEMIHOSTING_H
#define SEMIHOSTING_H

#include <stdint.h>

void say(const char *text);
void leave(uint32_t code);

#endif
