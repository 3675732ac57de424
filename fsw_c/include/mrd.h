/*
 * mrd.h - magnetic rate damping: the whole interface of the controller.
 *
 * Integers only. The caller owns configuration and state. Call mrd_init once to have a configuration checked,
 * mrd_reset once to start, and mrd_step once a cycle. The arithmetic, stage by stage, is in ../README.md; the
 * integers of a configuration come from `slackwater scale`.
 *
 * Two layers. The path turns counts and stamps into pulses and knows no modes: a team with a mode manager of its
 * own calls mrd_path_* and nothing else. The supervisor (mrd_*) wraps modes, counters and integrity around it.
 *
 * Units of the integers: "field count", "rate count", "tick" and "command" have the physical size that
 * `slackwater scale` prints for the mission. us is a microsecond. Qn means the integer divided by 2^n.
 *
 * A reference, not flight-qualified. The polarity of every coil and sensor axis must be shown on the hardware.
 */
#ifndef MRD_H
#define MRD_H

#include <stdint.h>

enum { MRD_VERSION = 1, MRD_AXES = 3 };

/* Values of mrd_path_config.law, and of mrd_law_trace.active (where MRD_LAW_NONE: no law acted). */
enum {
    MRD_LAW_NONE = 0,
    MRD_LAW_DERIVATIVE = 1, /* m = -k dB/dt */
    MRD_LAW_RATE = 2        /* m = k (w x B); falls back to the derivative while the gyro cannot be used */
};

/* Values of mrd_path_config.gain_scaling. */
enum {
    MRD_GAIN_CONSTANT = 1,
    MRD_GAIN_NORMALISED = 2 /* divided by |B|^2 in each cycle */
};

/* Values of mrd_path_config.saturation. */
enum {
    MRD_SATURATE_PER_AXIS = 1,      /* each axis is clamped by itself */
    MRD_SATURATE_KEEP_DIRECTION = 2 /* all axes are scaled so that the largest is at its limit */
};

/* Values of mrd_supervisor_config.settle_by. */
enum {
    MRD_SETTLE_BY_FIELD = 1, /* rate across the field, from its derivative */
    MRD_SETTLE_BY_GYRO = 2   /* |w|; falls back to the field while the gyro cannot be used */
};

/*
 * Modes. Every pair of codes differs in two bits: one flipped bit never makes another legal mode.
 *
 *   from \ on   | command that is accepted                        | by itself
 *   ------------|-------------------------------------------------|-----------------------------------------------
 *   hold-off    | safe > SAFE, inhibit > INHIBIT                   | separation time reached > DAMPING,
 *               |                                                 | low power > INHIBIT
 *   damping     | safe > SAFE, inhibit > INHIBIT                   | low power > INHIBIT, slow for the dwell > SETTLED
 *   settled     | safe > SAFE, inhibit > INHIBIT                   | low power > INHIBIT, fast for the wake dwell > DAMPING
 *   safe        | safe, resume > HOLD_OFF, arm with the key > BENCH | -
 *   inhibit     | safe > SAFE, inhibit, resume > HOLD_OFF          | neither low power nor commanded > HOLD_OFF
 *   bench       | safe > SAFE, resume > HOLD_OFF, bench (one pulse,  | -
 *               | not with low power)                             |
 *
 * The command comes first, then the row of the mode it leads to, once, in the same step; HOLD_OFF passes straight
 * on to DAMPING where the separation time has been reached. Pulses of the law leave in DAMPING only, pulses of a
 * bench command in BENCH only; in all other modes every coil is off. Any other mode value leads to SAFE.
 *
 * A state that fails its digest is restarted: SAFE, BENCH and values that are no mode become SAFE, a commanded INHIBIT
 * stays, the others go through HOLD_OFF.
 */
enum {
    MRD_MODE_HOLD_OFF = 3,
    MRD_MODE_DAMPING = 5,
    MRD_MODE_SETTLED = 6,
    MRD_MODE_SAFE = 9,
    MRD_MODE_INHIBIT = 10,
    MRD_MODE_BENCH = 12
};

/* Values of mrd_inputs.command. */
enum {
    MRD_COMMAND_NONE = 0,
    MRD_COMMAND_ARM = 1,     /* SAFE > BENCH, with command_key */
    MRD_COMMAND_INHIBIT = 2, /* coils off until resume */
    MRD_COMMAND_SAFE = 3,    /* coils off until resume, or arm */
    MRD_COMMAND_RESUME = 4,
    MRD_COMMAND_BENCH = 5    /* one pulse of command_ticks on command_coil, in this cycle */
};

/* Bit numbers of the status word. The comment is the text that tools show. */
enum {
    MRD_S_SAMPLE_MISSING = 0,        /* no field sample from the host */
    MRD_S_MAG_RANGE = 1,             /* a magnetometer count at its limit, or the field beyond 32767 counts */
    MRD_S_FIELD_IMPLAUSIBLE = 2,     /* norm of the field outside its plausible range */
    MRD_S_SAMPLE_OFF_TIME = 3,       /* sample not at its place in the cycle */
    MRD_S_SWITCH_OFF_UNSTAMPED = 4,  /* a coil was commanded and its switch-off not stamped since */
    MRD_S_BLANKED = 5,               /* sample inside the blanking time of a coil, or nothing known of the coils yet */
    MRD_S_NO_PREVIOUS = 6,           /* trusted sample without a trusted one before it */
    MRD_S_INTERVAL_SHORT = 7,        /* samples less than half a period apart */
    MRD_S_INTERVAL_LONG = 8,         /* samples more than one and a half periods apart */
    MRD_S_DERIVATIVE_CLAMPED = 9,    /* derivative of the field beyond its range, clamped */
    MRD_S_GYRO_MISSING = 10,         /* no gyro sample from the host */
    MRD_S_GYRO_RANGE = 11,           /* a gyro count at its limit, or the rate beyond 32767 counts */
    MRD_S_FELL_BACK = 12,            /* rate-damping law without a gyro: the derivative law takes its place, if there is a derivative */
    MRD_S_SATURATED_X = 13,          /* demand on x beyond its limit */
    MRD_S_SATURATED_Y = 14,          /* demand on y beyond its limit */
    MRD_S_SATURATED_Z = 15,          /* demand on z beyond its limit */
    MRD_S_SHORT_PULSE_X = 16,        /* pulse on x shorter than the shortest, dropped */
    MRD_S_SHORT_PULSE_Y = 17,        /* pulse on y shorter than the shortest, dropped */
    MRD_S_SHORT_PULSE_Z = 18,        /* pulse on z shorter than the shortest, dropped */
    MRD_S_ESTIMATE_FELL_BACK = 19,   /* rate estimate from the field in the gyro's place */
    MRD_S_COMMAND_REFUSED = 20,      /* command unknown, or not accepted in this mode or with these values */
    MRD_S_STATE_RESTARTED = 21,      /* state failed its integrity check: restarted */
    MRD_S_CONFIG_CORRUPT = 22,       /* configuration failed its integrity check: safe */
    MRD_S_COUNT = 23
};

/* Result of mrd_init and mrd_path_check: the first check that fails, in this order. The comment is the text. */
enum {
    MRD_OK = 0,             /* accepted */
    MRD_E_MAG = 1,          /* mag: shift in [1, 16], limit in [1, 32767], entries and offsets above -32768, absolute row sums up to 65535 */
    MRD_E_GYRO = 2,         /* gyro_fitted 0 or 1; if 1, gyro within the ranges of mag */
    MRD_E_NORM = 3,         /* norm_min_sq and norm_max_sq: 32768 <= min <= max <= 3221028867 */
    MRD_E_PERIOD = 4,       /* period_us: in [16384, 10000000] */
    MRD_E_SAMPLE = 5,       /* half_sample_us up to phase_us, phase_us below period_us, tolerance_us below a quarter of period_us, rounded down */
    MRD_E_WINDOW = 6,       /* tick_us at least 1, window_ticks in [1, 16384], shortest_ticks in [1, window_ticks] */
    MRD_E_TIMELINE = 7,     /* delay_us at least half_sample_us, the drive window ends within the period and leaves every coil its blanking_us before the next sample */
    MRD_E_FILTER = 8,       /* filter_gain: in [128, 32768] */
    MRD_E_CHOICE = 9,       /* law, gain_scaling and saturation: one of the named values; the rate law needs gyro_fitted */
    MRD_E_POLARITY = 10,    /* polarity: 1 or -1 */
    MRD_E_GAIN = 11,        /* gains: mantissa in [32768, 65535]; shift in [1, 31], or normalised by the field: within it for every plausible norm */
    MRD_E_SETTLE = 12,      /* settle_by one of the named values (gyro: needs gyro_fitted), settled_rate <= wake_rate <= 65534, dwells at least 1 */
    MRD_E_ESTIMATE = 13,    /* estimate_mantissa in [32768, 65535], estimate_shift in [1, 31] */
    MRD_E_BENCH = 14,       /* bench_limit_ticks in [1, window_ticks], bench_key not 0 */
    MRD_E_DIGEST = 15       /* digest is not that of the fields */
};

/* ---- configuration ---- */

/* One three-axis sensor: out_i = (sum_j matrix_ij raw_j) / 2^shift - offset_i. Example: matrix 6.25 * 2^11 with shift 11. */
typedef struct {
    int16_t matrix[9];  /* row by row, counts out per raw count, times 2^shift; absolute row sum up to 65535 */
    int16_t offset[3];  /* counts out; at least -32767 */
    uint16_t shift;     /* 1..16: the largest that keeps the row sums legal */
    int16_t limit;      /* raw count, 1..32767: |raw| >= limit is out of range (the sensor's clipped value) */
} mrd_sensor_config;

/* Gain of one law: command per unit of its input = mantissa / 2^shift; normalised: / 2^shift / |B|^2. */
typedef struct {
    uint16_t mantissa[3]; /* 32768..65535, per axis; the dipole limit of the axis is folded in */
    int16_t shift[3];     /* constant: 1..31; normalised: so that the shift after normalising stays in 1..31 */
} mrd_gain_config;

typedef struct {
    mrd_sensor_config mag;           /* raw counts to field counts */
    mrd_sensor_config gyro;          /* raw counts to rate counts; ignored where not fitted */
    uint16_t gyro_fitted;            /* 0 or 1 */
    uint16_t law;                    /* MRD_LAW_DERIVATIVE or MRD_LAW_RATE */
    uint16_t gain_scaling;           /* MRD_GAIN_* */
    uint16_t saturation;             /* MRD_SATURATE_* */
    uint32_t norm_min_sq;            /* field count^2, least plausible |B|^2; at least 32768 */
    uint32_t norm_max_sq;            /* field count^2, greatest plausible |B|^2 */
    uint32_t period_us;              /* us, the nominal cycle: 16384..10000000 */
    uint32_t phase_us;               /* us, mid-sample after the start of the cycle */
    uint32_t tolerance_us;           /* us, largest departure of mid-sample from phase_us */
    uint32_t half_sample_us;         /* us, half the sample length */
    uint32_t delay_us;               /* us, from mid-sample to the start of the drive window */
    uint32_t blanking_us[3];         /* us, least age of each coil's switch-off at the start of a sample */
    uint16_t tick_us;                /* us, of the pulse timer */
    int16_t window_ticks;            /* ticks in the drive window: 1..16384 */
    int16_t shortest_ticks;          /* ticks: shorter pulses are dropped; 1 drops none */
    int16_t polarity[3];             /* 1, or -1 where positive current makes a negative dipole */
    uint16_t filter_gain;            /* Q15, 128..32768: 1 - pole of the low-pass; 32768: no low-pass */
    mrd_gain_config derivative_gain; /* command per field count per period */
    mrd_gain_config rate_gain;       /* command per 2^16 field count x rate count; checked also where not used */
} mrd_path_config;

typedef struct {
    uint32_t settle_dwell;      /* cycles at or below settled_rate until SETTLED: about a quarter orbit */
    uint32_t wake_dwell;        /* cycles above wake_rate until DAMPING again */
    uint32_t hold_off_s;        /* s after separation until the first pulse of the law */
    uint16_t settle_by;         /* MRD_SETTLE_BY_* */
    uint16_t settled_rate;      /* rate count */
    uint16_t wake_rate;         /* rate count; settled_rate..65534 */
    uint16_t estimate_mantissa; /* 32768..65535: rate count per 2^-15 rad a period = mantissa / 2^shift */
    uint16_t estimate_shift;    /* 1..31 */
    uint16_t bench_key;         /* what the arm command must carry; not 0 */
    int16_t bench_limit_ticks;  /* ticks: longest pulse of a bench command */
} mrd_supervisor_config;

typedef struct {
    mrd_path_config path;
    mrd_supervisor_config supervisor;
    uint32_t digest; /* of all fields above, as mrd_config_digest has it */
} mrd_config;

/* ---- inputs, once a cycle ---- */

typedef struct {
    uint32_t cycle_start_us;   /* us, wraps */
    uint32_t sample_us;        /* us, wraps: mid-sample; ignored where mag_valid is 0 */
    uint32_t switch_off_us[3]; /* us, wraps: last actual switch-off of each coil. May be set anew while the coil is off, and must be
                                  at the host's start, after MRD_S_STATE_RESTARTED, and in place of a pulse that was left out */
    int16_t mag_raw[3];        /* raw counts */
    int16_t gyro_raw[3];       /* raw counts */
    uint16_t mag_valid;        /* 0: no sample */
    uint16_t gyro_valid;       /* 0: no sample */
} mrd_path_inputs;

typedef struct {
    mrd_path_inputs path;
    uint32_t separation_s;  /* s since separation, from a clock that survives a restart */
    uint16_t low_power;     /* not 0: coils are to stay off */
    uint16_t command;       /* MRD_COMMAND_* */
    uint16_t command_key;   /* with arm */
    uint16_t command_coil;  /* with bench: 0..2 */
    int16_t command_ticks;  /* with bench: signed ticks of coil current, 1 <= |ticks| <= bench_limit_ticks */
} mrd_inputs;

/* ---- state: owned by the caller, meaningful to the controller only ---- */

typedef struct {
    int32_t filter[3];         /* Q8 field count per period */
    uint32_t sample_us;        /* us: of field */
    uint32_t switch_off_us[3]; /* us: as of the last step */
    uint32_t drive_us[3];      /* us: while pending, earliest time at which a stamp is one of that pulse */
    int16_t field[3];          /* field counts: last trusted sample */
    uint16_t field_valid;      /* 0 or 1 */
    uint16_t filter_valid;     /* 0 or 1 */
    uint16_t off_known;        /* 0 or 1: switch_off_us holds stamps */
    uint16_t off_clear[3];     /* 0 or 1: this switch-off was once old enough */
    uint16_t pending[3];       /* 0 or 1: a pulse was commanded and its switch-off is not stamped yet */
} mrd_path_state;

typedef struct {
    uint16_t trusted;  /* cycles with a trusted sample */
    uint16_t rejected; /* cycles without one */
    uint16_t blanked;  /* cycles with a sample inside a blanking time */
    uint16_t fell_back; /* cycles in which the law fell back */
    uint16_t refused;  /* commands refused */
    uint16_t restarts; /* restarts after a failed integrity check */
} mrd_counters;        /* each stops at 65535 */

typedef struct {
    mrd_path_state path;
    uint32_t dwell;             /* cycles: towards settled, or towards waking */
    uint16_t mode;              /* MRD_MODE_* */
    uint16_t inhibit_commanded; /* 0, or 65535: no flipped bit takes it back */
    mrd_counters counters;
    uint32_t digest;            /* of all fields above, as mrd_state_digest has it */
} mrd_state;

/* ---- trace: every stage's values in this cycle; all zero where a stage was not reached ---- */

typedef struct {
    int16_t field[3]; /* field counts; clamped where out of range */
    int16_t rate[3];  /* rate counts; clamped where out of range */
    uint16_t rate_valid; /* 0 or 1 */
} mrd_calibration_trace;

typedef struct {
    uint32_t norm_sq; /* field count^2 */
} mrd_plausibility_trace;

typedef struct {
    uint32_t age_us[3]; /* us: from each switch-off to the start of the sample; 2147483647: old, saturated */
    uint16_t trusted;   /* 0 or 1 */
} mrd_gate_trace;

typedef struct {
    uint32_t interval_us; /* us between the two samples */
    uint16_t factor;      /* Q14: period / interval */
    int16_t derivative[3]; /* field count per period */
    uint16_t valid;       /* 0 or 1 */
} mrd_derivative_trace;

typedef struct {
    int32_t filter[3];   /* Q8 field count per period */
    int16_t filtered[3]; /* field count per period */
} mrd_low_pass_trace;

typedef struct {
    uint16_t active;      /* MRD_LAW_* */
    int32_t cross[3];     /* w x B, rate count x field count; rate law only */
    uint16_t mantissa[3]; /* of the gain used */
    int16_t shift[3];     /* of the gain used */
    int32_t demand[3];    /* Q15 of the dipole limit, unsaturated */
} mrd_law_trace;

typedef struct {
    int16_t command[3]; /* Q15 of the dipole limit, -32767..32767 */
} mrd_saturation_trace;

typedef struct {
    int16_t ticks[3]; /* signed ticks of coil current that the law asks for, whatever the mode */
} mrd_pulses_trace;

typedef struct {
    mrd_calibration_trace calibration;
    mrd_plausibility_trace plausibility;
    mrd_gate_trace gate;
    mrd_derivative_trace derivative;
    mrd_low_pass_trace low_pass;
    mrd_law_trace law;
    mrd_saturation_trace saturation;
    mrd_pulses_trace pulses;
} mrd_trace;

/* ---- outputs ---- */

typedef struct {
    int16_t ticks[3];      /* signed ticks of coil current, to be started together at the start of the drive window */
    uint16_t mode;         /* MRD_MODE_* */
    uint32_t status;       /* bits MRD_S_* */
    uint16_t rate;         /* rate counts: the estimate, no more than 65535; from the field also no more than 2 rad a period; 0 where not valid */
    uint16_t rate_valid;   /* 0 or 1 */
    uint16_t handover;     /* 1 in SETTLED: the attitude control may take over; rate_valid says whether the rate is known now */
    uint32_t digest;       /* of the configuration in use */
    mrd_counters counters;
    mrd_trace trace;
} mrd_outputs;

/* ---- the supervisor ---- */

/* Checks every field of config. Returns MRD_OK or the first MRD_E_* that applies. Cannot overflow: every sum is bounded by a check before it. */
uint16_t mrd_init(const mrd_config *config);

/* Puts state at its start: HOLD_OFF, no sample, no filter, counters 0. Needs no legal config. */
void mrd_reset(mrd_state *state);

/*
 * One cycle. config must have passed mrd_init; a config that changed since leads to SAFE. Any inputs are legal. state is
 * what mrd_reset or the last mrd_step left; one flipped bit always fails its digest, and it is restarted. After mrd_reset the
 * host must set switch_off_us to a time at which it knows the coils to be off.
 */
void mrd_step(mrd_state *state, const mrd_config *config, const mrd_inputs *inputs, mrd_outputs *outputs);

/* Fold of the fields in declared order, digest itself left out. Wraps by definition (mod 2^32). */
uint32_t mrd_config_digest(const mrd_config *config);
uint32_t mrd_state_digest(const mrd_state *state);

/* ---- the path alone ---- */

uint16_t mrd_path_check(const mrd_path_config *config);
void mrd_path_reset(mrd_path_state *state);

/*
 * Calibration to low-pass. Clears trace, fills its first five parts and returns status bits. Where waive_norm is not 0 an
 * implausible norm is reported but does not reject the sample (for the bench).
 */
uint32_t mrd_path_sense(mrd_path_state *state, const mrd_path_config *config, const mrd_path_inputs *inputs,
                        uint16_t waive_norm, mrd_trace *trace);

/* Law to pulses. Reads the first five parts of trace, fills the rest and returns status bits. */
uint32_t mrd_path_drive(const mrd_path_config *config, mrd_trace *trace);

/* Tells the path which pulses are really to be made in this cycle: each must be stamped before a sample is trusted again. */
void mrd_path_commit(mrd_path_state *state, const mrd_path_config *config, const mrd_path_inputs *inputs,
                     const int16_t ticks[3]);

/*
 * Layout, for whoever loads a build: MRD_VERSION, then for each structure its size and the offset of each field as this
 * build has them, then 65535.
 */
extern const uint16_t mrd_layout[];

#endif
