/* What the board says of itself (P4). The text is one block in flash; a % stands
 * for what is only known at run time. */
#include "gw_int.h"

#define TEXT2(x) #x
#define TEXT(x) TEXT2(x)

#define LSB_RAD (6.28318530717958648f / (GW_TURN_COUNTS) / (1e-6f * GW_WIN * GW_LOOP_US) / (1 << GW_SPEED_SHIFT))

const float gw_speed_lsb_mrad[] GW_FLASH = {LSB_RAD * 1000.0f};
const float gw_lsb_a_mrad[] GW_FLASH = {0.001f / LSB_RAD};

static const char text[] GW_FLASH =
	"proto 1.0\n"
	"fw " GW_FIRMWARE "\n"
	"board " GW_BOARD "-%s\n"
	"boot%b\n"
	"baud " TEXT(GW_BAUD) "\n"
	"loop " TEXT(GW_LOOP_US) "\n"
	"delay " TEXT(GW_DELAY_US) "\n"
	"win " TEXT(GW_WIN) "\n"
#if GW_PID
	"law pid\n"
#else
	"law pi\n"
#endif
	"deriv measurement\n"
	"gains%g\n"
	"form parallel\n"
	"disc backward-euler\n"
	"windup clamp\n"
	"num float\n"
	"limits%l\n"
	"input " GW_INPUT "\n"
#if GW_HAS_BUS
	"bus measured %f\n"
#else
	"bus nominal %f\n"
#endif
	"quad " TEXT(GW_QUADRANTS) "\n"
	"off " GW_OFF_MEANS "\n"
	"enc %f " GW_ENC_SIDE " %f\n"
	"scale %f %f %f %f\n"
	"max %f %f %f\n"
	"beat " TEXT(GW_BEAT_MIN_MS) " " TEXT(GW_BEAT_MAX_MS) "\n"
#if GW_CAPTURE || GW_RAMP || GW_EXPER
	"can"
#if GW_CAPTURE
	" capture"
#endif
#if GW_RAMP
	" ramp"
#endif
#if GW_EXPER
	" exper"
#endif
	"\n"
#endif
#if GW_CAPTURE
	"cap " TEXT(GW_CAPTURE) "\n"
#endif
	"inputs" GW_INPUT_NAMES "\n";

/* The values of the %f, in their order. */
static const float values[] GW_FLASH = {
	GW_BUS_NOMINAL,
	GW_CPT, GW_GEAR,
	LSB_RAD, GW_VOLTS_LSB_MV * 1e-3f, GW_CURRENT_LSB_MA * 1e-3f, GW_BUS_LSB_MV * 1e-3f,
	GW_VMAX, GW_WMAX, GW_IMAX,
};

static const char resets[] GW_FLASH = "power|pin|watchdog|brownout|soft|unknown";

/* gw_put_boot writes " <count> <cause>" of the start. */
void gw_put_boot(void)
{
	gw_put_u(g.boots);
	gw_put(' ');
	gw_put_at(resets, g.reset_cause);
}

static void put_special(char what, uint8_t *value)
{
	if (what == 's') {
		gw_put_hex(gw_port_serial(), 8);
	} else if (what == 'b') {
		gw_put_boot();
	} else if (what == 'g') {
		gw_put_all(gw_gain_names);
	} else if (what == 'l') {
		gw_put_all(gw_lim_names);
	} else {
		gw_put_hex(gw_float_bits(&values[*value]), 8);
		(*value)++;
	}
}

/* gw_id_poll sends the next line of the identity, and at the end the answer. */
void gw_id_poll(void)
{
	static uint8_t value;
	char c;

	if (!gw_room(127)) /* the longest line there may be */
		return;
	if (g.job_step == 0) {
		g.job_at = text;
		value = 0;
	}
	c = (char)GW_FLASH_BYTE(g.job_at);
	if (c == 0) {
		gw_ok(g.job_n);
		gw_put_u(g.job_step);
		gw_end();
		g.job = JOB_NONE;
		return;
	}
	gw_begin();
	gw_put('i');
	gw_put('d');
	gw_put(' ');
	while ((c = (char)GW_FLASH_BYTE(g.job_at)) != '\n') {
		g.job_at++;
		if (c == '%') {
			put_special((char)GW_FLASH_BYTE(g.job_at), &value);
			g.job_at++;
		} else {
			gw_put(c);
		}
	}
	g.job_at++;
	g.job_step++;
	gw_end();
}
