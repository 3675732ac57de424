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

enum { MRD_VERSION = 2, MRD_AXES = 3, MRD_TELEMETRY_BYTES = 50 };

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
 *   hold-off    | safe > SAFE, inhibit > INHIBIT                   | separation time reached, two cycles in a row > DAMPING,
 *               |                                                 | low power > INHIBIT
 *   damping     | safe > SAFE, inhibit > INHIBIT                   | low power > INHIBIT, diverging > PAUSE, once too often > SAFE,
 *               |                                                 | slow for the dwell > SETTLED
 *   settled     | safe > SAFE, inhibit > INHIBIT                   | fast for the wake dwell, no low power > DAMPING
 *   pause       | safe > SAFE, inhibit > INHIBIT, resume > HOLD_OFF | pause over > HOLD_OFF
 *   safe        | safe, resume > HOLD_OFF, arm with the key > BENCH | -
 *   inhibit     | safe > SAFE, inhibit, resume > HOLD_OFF          | neither low power nor commanded > HOLD_OFF
 *   bench       | safe > SAFE, resume > HOLD_OFF, bench (one pulse,  | -
 *               | not with low power)                             |
 *
 * The command comes first, then the row of the mode it leads to, once, in the same step. Pulses of the law leave in
 * DAMPING only, pulses of a bench command in BENCH only; in all other modes every coil is off. Any other mode value leads
 * to SAFE.
 *
 * A state that fails its digest is restarted: SAFE, BENCH and values that are no mode become SAFE, a commanded INHIBIT
 * and PAUSE stay, the others go through HOLD_OFF.
 */
enum {
    MRD_MODE_HOLD_OFF = 3,
    MRD_MODE_DAMPING = 5,
    MRD_MODE_SETTLED = 6,
    MRD_MODE_SAFE = 9,
    MRD_MODE_INHIBIT = 10,
    MRD_MODE_BENCH = 12,
    MRD_MODE_PAUSE = 15
};

/* Values of mrd_inputs.command. Every pair differs in two bits: one flipped bit never makes another command. */
enum {
    MRD_COMMAND_NONE = 0,
    MRD_COMMAND_ARM = 3,     /* SAFE > BENCH, with command_key */
    MRD_COMMAND_INHIBIT = 5, /* coils off until resume */
    MRD_COMMAND_SAFE = 6,    /* coils off until resume, or arm */
    MRD_COMMAND_RESUME = 9,  /* also gives back the retries, and coils that were taken out of use */
    MRD_COMMAND_BENCH = 10   /* one pulse of command_ticks on command_coil, in this cycle */
};

/* Values of mrd_currents_trace.fault: what the current sense says of a coil. */
enum {
    MRD_COIL_OK = 0,       /* nothing against it */
    MRD_COIL_WEAK = 1,     /* less current than commanded, or none */
    MRD_COIL_BACKWARD = 2, /* current against the command: out of use until resume */
    MRD_COIL_ON = 3        /* current while the magnetometer samples */
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
    MRD_S_MAG_FROZEN = 23,           /* all magnetometer counts unchanged for too long */
    MRD_S_MAG_DEAD_AXIS = 24,        /* one magnetometer count unchanged for too long while another moves */
    MRD_S_MAG_JUMP = 25,             /* field further from the last trusted sample than the tumble should take it */
    MRD_S_MAG_NOISY = 26,            /* norm of the field changes too much from sample to sample */
    MRD_S_GYRO_FROZEN = 27,          /* all gyro counts unchanged for too long */
    MRD_S_GYRO_DISAGREES = 28,       /* gyro and turn of the field contradict each other: gyro not used */
    MRD_S_COIL_CURRENT = 29,         /* a coil's current is not what was commanded */
    MRD_S_NO_PROGRESS = 30,          /* rate across the field hardly lower than an orbit before */
    MRD_S_DIVERGING = 31,            /* rate across the field grew while damping, or did not fall after a pause: pause, or safe */
    MRD_S_COUNT = 32
};

/*
 * Faults that the controller is built against. The comment is the text. mrd_fault_status has the status bits by which each shows;
 * ../README.md says how soon, and what the controller does.
 */
enum {
    MRD_F_MAG_MISSING = 0,        /* magnetometer: no sample */
    MRD_F_MAG_FROZEN = 1,         /* magnetometer: the same counts again and again */
    MRD_F_MAG_OUT_OF_RANGE = 2,   /* magnetometer: error value in place of counts */
    MRD_F_MAG_IMPLAUSIBLE = 3,    /* magnetometer: field too strong to be the Earth's */
    MRD_F_MAG_JUMP = 4,           /* magnetometer: single samples far off */
    MRD_F_MAG_DEAD_AXIS = 5,      /* magnetometer: one axis stands still */
    MRD_F_MAG_SATURATED = 6,      /* magnetometer: one axis at its limit */
    MRD_F_MAG_NOISY = 7,          /* magnetometer: noise that drowns the field's turn */
    MRD_F_MAG_BYTES_SWAPPED = 8,  /* magnetometer: bytes of each count swapped */
    MRD_F_GYRO_MISSING = 9,       /* gyro: no sample */
    MRD_F_GYRO_FROZEN = 10,       /* gyro: the same counts again and again */
    MRD_F_GYRO_RAILED = 11,       /* gyro: one axis at its limit */
    MRD_F_GYRO_DRIFT = 12,        /* gyro: bias that grows beyond use */
    MRD_F_COIL_OPEN = 13,         /* coil: open circuit, no current */
    MRD_F_COIL_SHORTED_ON = 14,   /* coil: on all the time */
    MRD_F_COIL_WEAK = 15,         /* coil: a third of its current */
    MRD_F_COIL_REVERSED = 16,     /* coil: leads reversed, dipole the wrong way round */
    MRD_F_COIL_BACKWARD = 17,     /* coil: driver reversed, current the wrong way round */
    MRD_F_COILS_SWAPPED = 18,     /* coils: two of them swapped */
    MRD_F_COIL_STAYS_ON = 19,     /* coil: does not switch off after a pulse */
    MRD_F_TIME_LATE = 20,         /* time: samples late in the cycle */
    MRD_F_TIME_EARLY = 21,        /* time: samples early in the cycle */
    MRD_F_TIME_REPEATED = 22,     /* time: the same cycle twice */
    MRD_F_TIME_FORWARD = 23,      /* time: clock set forward */
    MRD_F_TIME_BACKWARD = 24,     /* time: clock set back */
    MRD_F_TIME_WRAP = 25,         /* time: clock wraps */
    MRD_F_FLIP_STATE = 26,        /* computer: flipped bit in the state */
    MRD_F_FLIP_CONFIG = 27,       /* computer: flipped bit in the configuration */
    MRD_F_FLIP_INPUT = 28,        /* computer: flipped bit in the inputs */
    MRD_F_RESTART = 29,           /* computer: restart while damping */
    MRD_F_COMMAND_ILLEGAL = 30,   /* computer: command value that is none */
    MRD_F_MODE_ILLEGAL = 31,      /* computer: mode value that is none, under a right digest */
    MRD_F_WRONG_SIGN = 32,        /* divergence: all coils the wrong way round */
    MRD_F_TOO_FAST = 33,          /* divergence: tumble too fast for the cycle */
    MRD_F_TIP_OFF = 34,           /* divergence: tip-off three times as fast as foreseen */
    MRD_F_COUNT = 35
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
    MRD_E_CONTINUITY = 12,  /* jump_max_sq in [1, 3221028867], noise_limit at least 1 */
    MRD_E_AGREEMENT = 13,   /* agree_mantissa in [32768, 65535], agree_shift in [1, 31], agree_rate_max at least 1 */
    MRD_E_CURRENT = 14,     /* current_fitted 0 or 1; if 1, current_ticks in [1, window_ticks] and 1 <= current_off_max < each current_min */
    MRD_E_SETTLE = 15,      /* settle_by one of the named values (gyro: needs gyro_fitted), settled_rate <= wake_rate <= 65534, dwells at least 1 */
    MRD_E_ESTIMATE = 16,    /* estimate_mantissa in [32768, 65535], estimate_shift in [1, 31] */
    MRD_E_PROGRESS = 17,    /* growth in [257, 1024], progress in [1, 256], window_cycles and pause_cycles at least 1 */
    MRD_E_BENCH = 18,       /* bench_limit_ticks in [1, window_ticks], bench_key not 0 */
    MRD_E_DIGEST = 19       /* digest is not that of the fields */
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
    uint32_t delay_us;               /* us, from the nominal mid-sample, at phase_us, to the start of the drive window */
    uint32_t blanking_us[3];         /* us, least age of each coil's switch-off at the start of a sample */
    uint16_t tick_us;                /* us, of the pulse timer */
    int16_t window_ticks;            /* ticks in the drive window: 1..16384 */
    int16_t shortest_ticks;          /* ticks: shorter pulses are dropped; 1 drops none */
    int16_t polarity[3];             /* 1, or -1 where positive current makes a negative dipole */
    uint16_t filter_gain;            /* Q15, 128..32768: 1 - pole of the low-pass; 32768: no low-pass */
    mrd_gain_config derivative_gain; /* command per field count per period */
    mrd_gain_config rate_gain;       /* command per 2^16 field count x rate count; checked also where not used */
    uint32_t jump_max_sq;            /* field count^2: |change|^2 from the last trusted sample; 3221028867: never a jump */
    uint16_t noise_limit;            /* field counts: change of |B| from sample to sample; 65535: never noisy */
    uint16_t frozen_limit;           /* samples with the same counts on all axes; 0: never frozen */
    uint16_t dead_limit;             /* samples with the same count on one axis; 0: never dead */
    uint16_t gyro_frozen_limit;      /* gyro samples with the same counts on all axes; 0: never frozen */
    uint16_t agree_limit;            /* field counts a period: gyro against field; 0: not compared */
    uint16_t agree_mantissa;         /* 32768..65535: field counts a period per 2^16 rate count x field count = mantissa / 2^shift */
    uint16_t agree_shift;            /* 1..31 */
    int16_t agree_rate_max;          /* rate count: not compared above this on any axis */
    uint16_t current_fitted;         /* 0 or 1: coil current sense */
    int16_t current_ticks;           /* ticks: shorter pulses are not judged by their current */
    int16_t current_min[3];          /* current count: less at the end of a pulse is weak */
    int16_t current_off_max;         /* current count: more is not off */
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
    uint32_t window_cycles;     /* cycles of DAMPING over which the turn of the field is judged: half an orbit; below 4 it never is */
    uint32_t pause_cycles;      /* cycles in PAUSE: an orbit */
    uint16_t guard_turn;        /* Q15 rad a period: diverging above this only, faster than any tip-off; 65535: never */
    uint16_t stall_turn;        /* Q15 rad a period: no progress above this only */
    uint16_t growth;            /* Q8, 257..1024: diverging if the peak is also more than this times that of the window before */
    uint16_t progress;          /* Q8, 1..256: no progress if the peak is more than this times that of two windows before */
    uint16_t retries;           /* pauses before SAFE */
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
    uint16_t current_valid;    /* 0: no reading of the coil currents */
    int16_t current_driven[3]; /* current counts at the end of each coil's pulse in the cycle before; ignored where there was none */
    int16_t current_sampled[3]; /* current counts while the magnetometer sampled */
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

/* A ballot: 4 for each vote against, less 1 for each other. Tripped at 64, cleared at 0. */
typedef struct {
    uint16_t level;   /* 0..64 */
    uint16_t tripped; /* 0 or 1 */
} mrd_ballot;

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
    int16_t ticks[3];          /* ticks: pulses of the last step */
    int16_t mag_raw[3];        /* raw counts: last sample, trusted or not */
    uint16_t mag_known;        /* 0 or 1 */
    uint16_t mag_same[3];      /* samples in a row with that count; stops */
    uint16_t norm;             /* field counts: |B| of the last step */
    uint16_t norm_known;       /* 0 or 1 */
    mrd_ballot noise;          /* against the norm */
    mrd_ballot jumping;        /* against the field; tripped: it really turns that fast, and jumps only tell */
    int16_t gyro_raw[3];       /* raw counts: last sample */
    uint16_t gyro_known;       /* 0 or 1 */
    uint16_t gyro_same;        /* samples in a row with these counts; stops */
    int16_t rate[3];           /* rate counts: of the last step */
    uint16_t rate_known;       /* 0 or 1 */
    mrd_ballot agreement;
    mrd_ballot weak[3];
    mrd_ballot backward[3];
} mrd_path_state;

/* Peaks of the field's turn, Q15 rad a period; 0: none. Each is the largest of the least of four turns in a row. */
typedef struct {
    uint32_t window;      /* cycles of the present window */
    uint16_t peak[3];     /* of the present window and the two before */
    uint16_t least;       /* of the present four */
    uint16_t in_four;     /* 0..3 */
    uint16_t stalled;     /* 0 or 1: no progress at the end of the last window */
} mrd_progress;

typedef struct {
    uint16_t trusted;  /* cycles with a trusted sample */
    uint16_t rejected; /* cycles without one */
    uint16_t blanked;  /* cycles with a sample inside a blanking time */
    uint16_t fell_back; /* cycles in which the law fell back */
    uint16_t refused;  /* commands refused */
    uint16_t restarts; /* restarts after a failed integrity check */
    uint16_t corrupt;  /* cycles with a corrupt configuration */
    uint16_t mag_faults; /* cycles with MAG_RANGE, FIELD_IMPLAUSIBLE, MAG_FROZEN, MAG_DEAD_AXIS, MAG_JUMP or MAG_NOISY */
    uint16_t gyro_faults; /* cycles with GYRO_MISSING, GYRO_RANGE, GYRO_FROZEN or GYRO_DISAGREES */
    uint16_t coil_faults; /* cycles with COIL_CURRENT or SWITCH_OFF_UNSTAMPED */
    uint16_t time_faults; /* cycles with SAMPLE_OFF_TIME, INTERVAL_SHORT or INTERVAL_LONG */
    uint16_t trips;    /* divergences */
} mrd_counters;        /* each stops at 65535 */

typedef struct {
    mrd_path_state path;
    uint32_t dwell;             /* cycles: towards damping, settled or waking, or in PAUSE */
    uint16_t mode;              /* MRD_MODE_* */
    uint16_t inhibit_commanded; /* 0, or 65535: no flipped bit takes it back */
    uint16_t trips;             /* divergences since the last RESUME or SETTLED; stops */
    uint16_t cycle;             /* steps since reset; wraps */
    mrd_progress progress;
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
    uint16_t norm;    /* field counts, rounded down */
} mrd_plausibility_trace;

typedef struct {
    uint16_t fault[3]; /* MRD_COIL_* */
} mrd_currents_trace;

typedef struct {
    uint32_t age_us[3]; /* us: from each switch-off to the start of the sample; 2147483647: old, saturated */
    uint16_t trusted;   /* 0 or 1: the sample is used, all checks considered */
} mrd_gate_trace;

typedef struct {
    uint16_t same[3];     /* samples in a row with the same count, each magnetometer axis */
    uint32_t jump_sq;     /* field count^2: |change|^2 from the last trusted sample, each axis clamped */
    uint16_t norm_change; /* field counts: change of |B| from the last step */
    uint16_t gyro_same;   /* gyro samples in a row with the same counts */
} mrd_continuity_trace;

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
    uint16_t judged;     /* 0 or 1: gyro and field were compared */
    int32_t residual[3]; /* field count per period: derivative + w x B */
} mrd_agreement_trace;

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
    uint16_t turn;         /* Q15 rad a period: chord of the field's turn; no more than 65535 */
    uint16_t across;       /* rate counts: rate across the field, from its derivative; no more than 65535 */
    uint16_t across_valid; /* 0 or 1 */
} mrd_estimate_trace;

typedef struct {
    mrd_calibration_trace calibration;
    mrd_plausibility_trace plausibility;
    mrd_currents_trace currents;
    mrd_gate_trace gate;
    mrd_continuity_trace continuity;
    mrd_derivative_trace derivative;
    mrd_low_pass_trace low_pass;
    mrd_agreement_trace agreement;
    mrd_law_trace law;
    mrd_saturation_trace saturation;
    mrd_pulses_trace pulses;
    mrd_estimate_trace estimate; /* of the supervisor */
} mrd_trace;

/* ---- outputs ---- */

typedef struct {
    int16_t ticks[3];      /* signed ticks of coil current, to be started together at the start of the drive window */
    uint16_t mode;         /* MRD_MODE_* */
    uint32_t status;       /* bits MRD_S_* */
    uint16_t rate;         /* rate counts: the estimate, no more than 65535; from the field also no more than 2 rad a period; 0 where not valid */
    uint16_t rate_valid;   /* 0 or 1 */
    uint16_t handover;     /* 1 in SETTLED: the attitude control may take over; rate_valid says whether the rate is known now */
    uint16_t cycle;        /* steps since reset, this one not counted; wraps at 65536 */
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

/*
 * Status, mode, rate, counters, coils and pulses of one cycle as MRD_TELEMETRY_BYTES bytes; the table is in ../README.md.
 * Cannot overflow: every field has at least the width of its integer.
 */
void mrd_telemetry(const mrd_outputs *outputs, uint8_t bytes[MRD_TELEMETRY_BYTES]);

/* Status bits by which each fault MRD_F_* shows, any of them; 0: the fault does not show, or needs none. */
extern const uint32_t mrd_fault_status[MRD_F_COUNT];

/* Fold of the fields in declared order, digest itself left out. Wraps by definition (mod 2^32). */
uint32_t mrd_config_digest(const mrd_config *config);
uint32_t mrd_state_digest(const mrd_state *state);

/* ---- the path alone ---- */

uint16_t mrd_path_check(const mrd_path_config *config);
void mrd_path_reset(mrd_path_state *state);

/*
 * Calibration to agreement. Clears trace, fills its parts up to agreement and returns status bits. Where waive is not 0 an
 * implausible, frozen, dead, jumping or noisy field is reported but does not reject the sample (for the bench).
 */
uint32_t mrd_path_sense(mrd_path_state *state, const mrd_path_config *config, const mrd_path_inputs *inputs,
                        uint16_t waive, mrd_trace *trace);

/* Law to pulses. Reads what mrd_path_sense left in trace, fills law, saturation and pulses and returns status bits. */
uint32_t mrd_path_drive(const mrd_path_config *config, mrd_trace *trace);

/* Sets to 0 the pulses of coils that are out of use. To be called on trace.pulses.ticks before they are made. */
void mrd_path_withhold(const mrd_path_state *state, int16_t ticks[3]);

/* Tells the path which pulses are really to be made in this cycle: each must be stamped before a sample is trusted again. */
void mrd_path_commit(mrd_path_state *state, const mrd_path_config *config, const mrd_path_inputs *inputs,
                     const int16_t ticks[3]);

/* Gives back the coils that were taken out of use. */
void mrd_path_restore(mrd_path_state *state);

/*
 * Layout, for whoever loads a build: MRD_VERSION, then for each structure its size and the offset of each field as this
 * build has them, then 65535.
 */
extern const uint16_t mrd_layout[];

#endif
