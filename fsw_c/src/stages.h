/*
 * stages.h - the stages of the path, one file each, in the order in which a cycle runs through them. Each takes what
 * it needs from the configuration, writes its part of the trace and returns its status bits.
 */
#ifndef MRD_STAGES_H
#define MRD_STAGES_H

#include "mrd.h"

/* One vote on a ballot. */
void mrd_vote(mrd_ballot *ballot, uint16_t against);

/* Stage 1: raw counts to field and rate. */
uint32_t mrd_calibrate(const mrd_path_config *config, const mrd_path_inputs *inputs, mrd_calibration_trace *trace);

/* Stage 2: norm of the field. Not to be called without a field in range. */
uint32_t mrd_check_norm(const mrd_path_config *config, const int16_t field[3], mrd_plausibility_trace *trace);

/* Stage 3: coil currents, where there is a sense. */
uint32_t mrd_check_currents(mrd_path_state *state, const mrd_path_config *config, const mrd_path_inputs *inputs,
                            mrd_currents_trace *trace);

/* Stage 4: place of the sample in the cycle, and age of every switch-off. have_sample is 0 or 1. */
uint32_t mrd_gate(mrd_path_state *state, const mrd_path_config *config, const mrd_path_inputs *inputs,
                  uint16_t have_sample, const mrd_currents_trace *currents, mrd_gate_trace *trace);

/* Stage 5: this sample against those before it. before: status bits of stages 1 to 4. */
uint32_t mrd_check_continuity(mrd_path_state *state, const mrd_path_config *config, const mrd_path_inputs *inputs,
                              uint32_t before, mrd_trace *trace);

/* Stage 6: change of the field over the measured interval, for a trusted sample. */
uint32_t mrd_derive(mrd_path_state *state, const mrd_path_config *config, uint32_t sample_us, const int16_t field[3],
                    mrd_derivative_trace *trace);

/* Stage 7: first-order low-pass, for a valid derivative. */
void mrd_low_pass(mrd_path_state *state, const mrd_path_config *config, const int16_t derivative[3],
                  mrd_low_pass_trace *trace);

/* Stage 8: gyro against derivative. before: status bits of the stages before; earlier_field: of the step before. */
uint32_t mrd_check_agreement(mrd_path_state *state, const mrd_path_config *config, uint32_t before,
                             const int16_t earlier_field[3], mrd_trace *trace);

/* Stage 9: which law acts, its gain and its demand. */
uint32_t mrd_apply_law(const mrd_path_config *config, mrd_trace *trace);

/* Stage 10: demand to command, within the dipole limit. */
uint32_t mrd_saturate(const mrd_path_config *config, const int32_t demand[3], mrd_saturation_trace *trace);

/* Stage 11: command to pulse widths. */
uint32_t mrd_make_pulses(const mrd_path_config *config, const int16_t command[3], mrd_pulses_trace *trace);

#endif
