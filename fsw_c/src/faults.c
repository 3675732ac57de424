/* By which status bits each fault shows. Tests hold it against what flights with these faults really show. */
#include "arith.h"

#define S(bit) MRD_BIT(MRD_S_##bit)

const uint32_t mrd_fault_status[MRD_F_COUNT] = {
    S(SAMPLE_MISSING),                                                                                /* MAG_MISSING */
    S(MAG_FROZEN),                                                                                    /* MAG_FROZEN */
    S(MAG_RANGE),                                                                                     /* MAG_OUT_OF_RANGE */
    S(FIELD_IMPLAUSIBLE) | S(MAG_RANGE),                                                              /* MAG_IMPLAUSIBLE */
    S(MAG_JUMP) | S(FIELD_IMPLAUSIBLE) | S(MAG_NOISY) | S(MAG_RANGE),                                 /* MAG_JUMP */
    S(MAG_DEAD_AXIS) | S(FIELD_IMPLAUSIBLE) | S(MAG_JUMP) | S(MAG_NOISY),                             /* MAG_DEAD_AXIS */
    S(MAG_RANGE),                                                                                     /* MAG_SATURATED */
    S(MAG_NOISY) | S(MAG_JUMP) | S(FIELD_IMPLAUSIBLE),                                                /* MAG_NOISY */
    S(MAG_RANGE) | S(FIELD_IMPLAUSIBLE) | S(MAG_JUMP) | S(MAG_NOISY),                                 /* MAG_BYTES_SWAPPED */
    S(GYRO_MISSING),                                                                                  /* GYRO_MISSING */
    S(GYRO_FROZEN) | S(GYRO_DISAGREES),                                                               /* GYRO_FROZEN */
    S(GYRO_RANGE),                                                                                    /* GYRO_RAILED */
    S(GYRO_DISAGREES) | S(GYRO_RANGE),                                                                /* GYRO_DRIFT */
    S(COIL_CURRENT) | S(NO_PROGRESS),                                                                 /* COIL_OPEN */
    S(COIL_CURRENT) | S(FIELD_IMPLAUSIBLE) | S(MAG_JUMP) | S(MAG_NOISY) | S(NO_PROGRESS) | S(DIVERGING), /* COIL_SHORTED_ON */
    S(COIL_CURRENT) | S(NO_PROGRESS),                                                                 /* COIL_WEAK */
    S(NO_PROGRESS) | S(DIVERGING),                                                                    /* COIL_REVERSED */
    S(COIL_CURRENT) | S(NO_PROGRESS) | S(DIVERGING),                                                  /* COIL_BACKWARD */
    S(NO_PROGRESS) | S(DIVERGING),                                                                    /* COILS_SWAPPED */
    S(SWITCH_OFF_UNSTAMPED) | S(COIL_CURRENT),                                                        /* COIL_STAYS_ON */
    S(SAMPLE_OFF_TIME),                                                                               /* TIME_LATE */
    S(SAMPLE_OFF_TIME),                                                                               /* TIME_EARLY */
    S(SWITCH_OFF_UNSTAMPED) | S(INTERVAL_SHORT),                                                      /* TIME_REPEATED */
    S(INTERVAL_LONG),                                                                                 /* TIME_FORWARD */
    S(BLANKED) | S(INTERVAL_LONG),                                                                    /* TIME_BACKWARD */
    0,                                                                                                /* TIME_WRAP */
    S(STATE_RESTARTED),                                                                               /* FLIP_STATE */
    S(CONFIG_CORRUPT),                                                                                /* FLIP_CONFIG */
    0,                                                                                                /* FLIP_INPUT */
    S(BLANKED),                                                                                       /* RESTART */
    S(COMMAND_REFUSED),                                                                               /* COMMAND_ILLEGAL */
    0,                                                                                                /* MODE_ILLEGAL */
    S(DIVERGING),                                                                                     /* WRONG_SIGN */
    S(NO_PROGRESS) | S(DIVERGING),                                                                    /* TOO_FAST */
    S(MAG_JUMP)                                                                                       /* TIP_OFF */
};
