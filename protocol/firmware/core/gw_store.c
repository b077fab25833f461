/* Lasting memory. Everything is kept twice and written in turn, so that power
 * may fail during a write: the copy before it is still there.
 *
 *   0  boots, crc      4  boots, crc                       two copies
 *   8  writes, gains…, crc      then the same again        two copies */
#include "gw_int.h"

#define BOOT_SIZE 4u
#define GAINS_AT 8u
#define GAINS_SIZE (4u + 4u * G_N)

static uint16_t crc_of(const uint8_t *p, uint8_t n)
{
	uint16_t crc = 0x4757;

	for (; n > 0; n--)
		crc = gw_crc(crc, *p++);
	return crc;
}

/* read fetches a record and says whether it is whole: its last two bytes are the
 * CRC of the others, its first two a running number. */
static uint8_t read(uint16_t at, uint8_t *rec, uint8_t n, uint16_t *number)
{
	uint16_t crc;

	if (!gw_port_store_read(at, rec, n))
		return 0;
	gw_copy(&crc, rec + n - 2, 2);
	gw_copy(number, rec, 2);
	return crc == crc_of(rec, (uint8_t)(n - 2u));
}

/* write closes a record with its CRC, writes it and reads it back. */
static uint8_t write(uint16_t at, uint8_t *rec, uint8_t n)
{
	uint16_t crc = crc_of(rec, (uint8_t)(n - 2u)), number;

	gw_copy(rec + n - 2, &crc, 2);
	if (!gw_port_store_write(at, rec, n) || !read(at, rec, n, &number))
		return 0;
	return crc == crc_of(rec, (uint8_t)(n - 2u));
}

/* newer is the copy, 0 or 1, with the larger running number; 2: none is whole.
 * The record and its number are left in rec and *number. */
static uint8_t newer(uint16_t at, uint8_t *rec, uint8_t n, uint16_t *number)
{
	uint16_t a, b;
	uint8_t one = read(at, rec, n, &a), two = read((uint16_t)(at + n), rec, n, &b), which;

	*number = 0;
	if (!one && !two)
		return 2;
	which = (uint8_t)(two && (!one || (uint16_t)(b - a) < 0x8000u));
	read(which ? (uint16_t)(at + n) : at, rec, n, number);
	return which;
}

/* gw_store_boot counts this start and returns the count. */
uint16_t gw_store_boot(void)
{
	uint8_t rec[BOOT_SIZE];
	uint16_t boots;
	uint8_t which = newer(0, rec, BOOT_SIZE, &boots);

	boots++;
	gw_copy(rec, &boots, 2);
	write(which == 0 ? BOOT_SIZE : 0, rec, BOOT_SIZE);
	return boots;
}

/* gw_store_load reads the stored gains, all zero where there are none. */
uint8_t gw_store_load(uint32_t *gains, uint16_t *writes)
{
	uint8_t rec[GAINS_SIZE];

	for (uint8_t i = 0; i < G_N; i++)
		gains[i] = 0;
	if (newer(GAINS_AT, rec, GAINS_SIZE, writes) == 2)
		return 0;
	gw_copy(gains, rec + 2, 4 * G_N);
	return 1;
}

/* gw_store_save writes the gains over the older copy. */
uint8_t gw_store_save(const uint32_t *gains, uint16_t *writes)
{
	uint8_t rec[GAINS_SIZE];
	uint8_t which = newer(GAINS_AT, rec, GAINS_SIZE, writes);

	(*writes)++;
	gw_copy(rec, writes, 2);
	gw_copy(rec + 2, gains, 4 * G_N);
	return write((uint16_t)(which == 0 ? GAINS_AT + GAINS_SIZE : GAINS_AT), rec, GAINS_SIZE);
}
