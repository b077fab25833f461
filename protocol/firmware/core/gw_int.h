/* What the parts of the core share. Nothing here is for the board. */
#ifndef GW_INT_H
#define GW_INT_H

#include "gw.h"
#include "gw_defaults.h"

enum { REF_CRC = 1, REF_LONG, REF_VERB, REF_ARG, REF_STATE, REF_NONCE, REF_TOKEN, REF_HARD, REF_FULL, REF_MOVING,
	REF_INTERLOCK, REF_TRIPPED, REF_ABSENT, REF_SET, REF_MEMORY, REF_LIMITS, REF_BUSY };

/* The longest answer with its end: that of cap get, or else that of log. */
#if GW_CAPTURE
#define GW_ANSWER_SIZE 127u
#else
#define GW_ANSWER_SIZE 84u
#endif

/* Slots of the limits, in the order of the wire. */
enum { LIM_V, LIM_W,
#if GW_HAS_CURRENT
	LIM_I,
#endif
#if GW_HAS_BUS
	LIM_BMAX, LIM_BMIN,
#endif
	LIM_A, LIM_TURNS, LIM_STALL, LIM_WRONG, LIM_NOCNT, LIM_BREAK,
#if GW_HAS_CURRENT
	LIM_HEAT,
#endif
	LIM_RUN, LIM_BEAT, LIM_SLEW, LIM_N };

/* Slots of a gain set. */
enum { G_KP, G_KI,
#if GW_PID
	G_KD, G_TF,
#endif
	G_B, G_KV, G_KS, G_N };

/* A multiplication by m / 2^s. */
struct gw_scale {
	int32_t m;
	uint8_t s;
};

struct gw_stopped {
	uint8_t cause;
	uint32_t seen, beat, off; /* µs */
	int32_t speed;            /* mrad/s */
};

/* What telemetry says of one instant. */
struct gw_snap {
	uint8_t seq, flags;
	uint32_t us;
	int16_t speed, volts, current, bus, set; /* LSBs of the wire */
	uint16_t counts;
};

enum { JOB_NONE, JOB_ID, JOB_TEL };

struct gw_all {
	/* Written under the lock or in the receive interrupt. */
	volatile uint8_t state;
	uint8_t trip;      /* latched cause */
	uint8_t run;       /* number of the run, so that the loop sees a new one */
	uint8_t limits_in; /* a set of limits was put in use since the start */
	uint8_t nonce_ok;
	uint32_t nonce, nonce_us;
	uint16_t nonce_seq;
	uint16_t token, k;
	uint32_t beat_us;  /* last heartbeat accepted */
	uint32_t lapse_us; /* arm, or last drive line accepted */
	int32_t target;    /* mV or mrad/s */
	uint8_t ramp_from; /* GW_DRIVING or GW_LOOPING */
	uint16_t cuts;
	uint32_t cut_us;
	uint8_t cut_due, ev_due, ev_cause;
	uint32_t ev_us;

	/* The loop's. */
	uint32_t us;
	uint16_t ring[2 * GW_WIN + 1]; /* counts of the last two windows */
	uint16_t ring_at;
	int32_t position; /* counts since the start of the run */
	int32_t raw;      /* speed, LSBs */
	int32_t mrad;     /* speed, mrad/s */
	int32_t amps;     /* mA */
	int32_t bus;      /* mV */
	int32_t uv;       /* drive in µV, after the slew limit */
	int32_t u1, u2;   /* mV applied, now and a period ago */
	int32_t volts_sum;
	uint16_t volts_n;
	uint8_t sat;
	uint8_t run_seen;
	uint32_t heat;
	uint8_t heat_tick;
	uint32_t run_us, stall_us, wrong_us, nocnt_us, ramp_us;
	int32_t stall_ref, wrong_ref;
	uint8_t rest;

	/* Telemetry. */
	uint16_t every, tick;   /* loops a line; 0: silent */
	uint16_t slow_every, slow_tick;
	uint8_t text, extra;    /* form asked for */
	volatile uint8_t due;   /* snap waits to be sent */
	uint8_t slow_due;
	uint8_t seq;
	struct gw_snap snap;

	/* Sets. */
	uint32_t lim_held[LIM_N], lim_staged[LIM_N];
	uint32_t lim[LIM_N]; /* held, in the integer unit of the limiter */
	uint32_t gain_run[G_N], gain_staged[G_N];
	uint16_t boots;
	uint8_t reset_cause;

	/* The line in hand and the answer last given. */
	char line[128];
	uint8_t n, over, dirty, held;
	uint16_t last_n, last_crc;
	uint8_t answered, answer_n;
	uint32_t err_us;
	uint8_t err_any;
	uint8_t job;
	uint16_t job_n;
	uint8_t job_step;
	const char *job_at;
	struct gw_snap job_snap;
};

extern struct gw_all g;

/* gw_text.c: numbers, CRC, lines out. A line out goes straight to the transmit
 * ring; the caller has asked gw_room first. */
uint16_t gw_crc(uint16_t crc, uint8_t c);
uint16_t gw_set_crc(const uint32_t *v, uint8_t n);
uint8_t gw_int32(const char *s, int32_t *v);
uint8_t gw_uint16(const char *s, uint16_t *v);
uint8_t gw_hex(const char *s, uint8_t digits, uint32_t *v);
uint8_t gw_word(const char *s);
uint8_t gw_room(uint8_t n);
void gw_tx_reset(void);
void gw_begin(void);
void gw_begin_answer(uint16_t n);
void gw_end(void);
void gw_end_hex(void);
void gw_put(char c);
void gw_puts(const char *flash);
void gw_put_at(const char *flash, uint8_t index);
void gw_put_all(const char *flash);
void gw_put_hex(uint32_t v, uint8_t digits);
void gw_put_count(uint32_t v);
void gw_put_u(uint32_t v);
void gw_put_i(int32_t v);
void gw_ok(uint16_t n);
void gw_no(uint16_t n, uint8_t code);
void gw_again(void);
void gw_blank(void);

/* The words of requests, in the order of the list in gw_text.c. */
enum { W_NONE, W_ID, W_TEL, W_STOP, W_RATE, W_NONCE, W_ARM, W_DIS, W_RAMP, W_RESET, W_LIM, W_GAIN, W_LOG, W_IN, W_CAP,
	W_DV, W_DS, W_HB, W_GET, W_SET, W_USE, W_CRC, W_STORE, W_RUN, W_STATE, W_NOW,
#if GW_EXPER
	W_EXP, W_RELAY, W_PRBS, W_STEPS,
#endif
};

/* gw_scale.c */
#if GW_FIXED
struct gw_scale gw_scale_of(uint32_t bits);
int64_t gw_times(int32_t a, struct gw_scale k);
int32_t gw_clip(int64_t v);
#endif
void gw_copy(void *to, const void *from, uint8_t n);
/* a times a binary32; and a limit as an integer in parts of
 * its unit, which is what the loop compares. All round to nearest and hold the
 * result inside 31 bits. */
int32_t gw_mul(int32_t a, uint32_t bits);
uint32_t gw_scaled(uint32_t bits, uint32_t by);
void gw_from_flash(void *to, const void *flash, uint8_t n);
uint32_t gw_float_bits(const float *flash);

/* gw_run.c. Those with _locked are called with the lock held. */
void gw_stop_locked(uint8_t cause, uint32_t seen);
void gw_log_init(uint8_t cause);
void gw_motion(uint8_t verb, char **f, uint8_t n);
void gw_nonce(uint16_t n);
void gw_arm(uint16_t n, char **f, uint8_t nf);
void gw_disarm(uint16_t n);
void gw_ramp(uint16_t n, char **f, uint8_t nf);
void gw_reset(uint16_t n);
void gw_log(uint16_t n, char **f, uint8_t nf);
uint8_t gw_inputs_cause(void);
uint8_t gw_at_rest(void);

/* gw_loop.c */
void gw_loop_init(void);
uint8_t gw_judge_rest(void);

/* gw_law.c */
void gw_law_use(void);
void gw_law_reset(void);
int32_t gw_law_step(int32_t set_mrad, int32_t lo_mv, int32_t hi_mv, uint8_t *sat);

/* gw_sets.c, gw_store.c */
extern const char gw_lim_names[], gw_gain_names[];
void gw_sets_init(void);
void gw_limit(uint16_t n, char **f, uint8_t nf);
void gw_gain(uint16_t n, char **f, uint8_t nf);
uint16_t gw_store_boot(void);
uint8_t gw_store_load(uint32_t *gains, uint16_t *writes);
uint8_t gw_store_save(const uint32_t *gains, uint16_t *writes);

/* gw_tele.c */
void gw_snap_locked(struct gw_snap *s);
void gw_send_t(const struct gw_snap *s, uint8_t text);
void gw_send_u(const struct gw_snap *s, uint8_t text);
void gw_tele_poll(void);
void gw_tele_loop(void);
void gw_rate(uint16_t n, char **f, uint8_t nf);

/* gw_id.c */
void gw_id_poll(void);
void gw_put_boot(void);
extern const float gw_speed_lsb_mrad[], gw_lsb_a_mrad[];

/* gw_exper.c */
#if GW_EXPER
void gw_exper(uint16_t n, char **f, uint8_t nf);
int32_t gw_exper_loop(int32_t mv);
int32_t gw_exper_size(void); /* mV that the experiment adds and takes away */
void gw_exper_end(void);
#endif

/* gw_capture.c */
#if GW_CAPTURE
void gw_cap_init(void);
void gw_cap_loop(int32_t mv);
void gw_cap_trigger_locked(void);
void gw_cap_stop_locked(void);
void gw_cap(uint16_t n, char **f, uint8_t nf);
#endif

#endif
