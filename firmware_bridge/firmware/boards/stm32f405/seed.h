/* A number that differs at every start of the board, for its stream ids. */
#ifndef SEED_H
#define SEED_H

#include <stdint.h>

uint32_t seed_new(void);

#endif
