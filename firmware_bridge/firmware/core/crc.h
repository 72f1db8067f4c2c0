/* CRC-32/ISO-HDLC, the one of zlib; its check value for "123456789" is 0xCBF43926. */
#ifndef PD_CRC_H
#define PD_CRC_H

#include <stdint.h>

#define PD_CRC_START 0xFFFFFFFFu

/* Residue of a message together with its own CRC behind it, before the last inversion. */
#define PD_CRC_SEALED 0xDEBB20E3u

/* Return the state after one more byte; the CRC is the inverted state. */
uint32_t pd_crc_push(uint32_t crc, uint8_t byte);

#endif
