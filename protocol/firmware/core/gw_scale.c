/* Scales: in binary32 where the law is, else in integers only, so that a
 * fixed-point build links no floating point at all. */
#include "gw_int.h"

/* gw_copy copies bytes: the core uses no library at all. */
void gw_copy(void *to, const void *from, uint8_t n)
{
	uint8_t *t = to;
	const uint8_t *f = from;

	while (n-- > 0)
		*t++ = *f++;
}

#if GW_FIXED

/* gw_scale_of makes a multiplier of a finite binary32. Values of 2^22 and above
 * are held there; they are far beyond any gain or scale. */
struct gw_scale gw_scale_of(uint32_t bits)
{
	struct gw_scale k = {0, 1};
	int16_t e = (int16_t)((bits >> 23) & 255u);
	int16_t s = (int16_t)(150 - e);
	int32_t m = (int32_t)((bits & 0x7FFFFFu) | 0x800000u);

	if (e == 0 || s > 62)
		return k;
	if (s < 1) {
		s = 1;
		m = 0xFFFFFF;
	}
	k.m = bits & 0x80000000u ? -m : m;
	k.s = (uint8_t)s;
	return k;
}

/* gw_times returns a·k, rounded. */
int64_t gw_times(int32_t a, struct gw_scale k)
{
	return ((int64_t)a * k.m + ((int64_t)1 << (k.s - 1))) >> k.s;
}

int32_t gw_clip(int64_t v)
{
	if (v > 0x7FFFFFFF)
		return 0x7FFFFFFF;
	return v < -0x7FFFFFFF ? -0x7FFFFFFF : (int32_t)v;
}

int32_t gw_mul(int32_t a, uint32_t bits)
{
	return gw_clip(gw_times(a, gw_scale_of(bits)));
}

uint32_t gw_scaled(uint32_t bits, uint32_t by)
{
	int16_t s = (int16_t)(150 - (int16_t)((bits >> 23) & 255u));
	uint64_t p = (uint64_t)((bits & 0x7FFFFFu) | 0x800000u) * by;

	if (bits < 0x00800000u || s > 62)
		return 0;
	if (s < 1)
		return p == 0 ? 0 : 0x7FFFFFFFu;
	p = (p + ((uint64_t)1 << (s - 1))) >> s;
	return p > 0x7FFFFFFFu ? 0x7FFFFFFFu : (uint32_t)p;
}

#else

static float value(uint32_t bits)
{
	float v;

	gw_copy(&v, &bits, 4);
	return v;
}

/* held rounds, and holds inside 32 bits. */
static int32_t held(float v)
{
	if (v > 2147483500.0f)
		return 0x7FFFFFFF;
	if (v < -2147483500.0f)
		return -0x7FFFFFFF;
	return (int32_t)(v < 0 ? v - 0.5f : v + 0.5f);
}

int32_t gw_mul(int32_t a, uint32_t bits)
{
	return held((float)a * value(bits));
}

uint32_t gw_scaled(uint32_t bits, uint32_t by)
{
	return (uint32_t)held(value(bits) * (float)by);
}

#endif

/* gw_from_flash copies constants, which may lie in another memory. */
void gw_from_flash(void *to, const void *flash, uint8_t n)
{
	uint8_t *t = to;
	const uint8_t *f = flash;

	for (; n > 0; n--, f++)
		*t++ = GW_FLASH_BYTE(f);
}

/* gw_float_bits reads a constant from flash as its 32 bits. */
uint32_t gw_float_bits(const float *flash)
{
	uint32_t u;

	gw_from_flash(&u, flash, 4);
	return u;
}
