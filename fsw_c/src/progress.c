/*
 * Progress: does damping damp? Peaks of the field's turn, Q15 rad a period, over windows of half an orbit: over such a span
 * even a tumble that nothing drives shows its largest rate. A spin along the field may show later, so that growth counts only
 * beyond any tip-off. Cannot overflow: 16-bit peaks times Q8 factors up to 1024.
 */
#include "arith.h"
#include "supervisor.h"

/* Four turns in a row count by their least: a wild sample spoils two, never four. */
static void take(mrd_progress *progress, uint16_t turn)
{
    if (progress->in_four == 0u || turn < progress->least) {
        progress->least = turn;
    }
    progress->in_four++;
    if (progress->in_four >= 4u) {
        progress->in_four = 0;
        if (progress->least > progress->peak[0]) {
            progress->peak[0] = progress->least;
        }
    }
}

/* More than factor / 256 times the earlier peak, which must be there. */
static uint16_t exceeds(uint16_t peak, uint16_t earlier, uint16_t factor)
{
    return earlier != 0u && ((uint32_t)peak << 8) > mrd_mul_u16(earlier, factor);
}

uint16_t mrd_judge_progress(mrd_progress *progress, const mrd_supervisor_config *config, uint16_t trips,
                            const mrd_estimate_trace *estimate)
{
    uint16_t *peak = progress->peak;
    uint16_t diverging;

    if (estimate->across_valid) {
        take(progress, estimate->turn);
    }
    progress->window = mrd_count_u32(progress->window);
    if (progress->window < config->window_cycles) {
        return 0;
    }
    progress->stalled = peak[0] > config->stall_turn && exceeds(peak[0], peak[2], config->progress);
    diverging = peak[0] > config->guard_turn && (exceeds(peak[0], peak[1], config->growth) || (trips && progress->stalled));
    peak[2] = peak[1];
    peak[1] = peak[0];
    peak[0] = 0;
    progress->window = 0;
    progress->in_four = 0;
    return diverging;
}
