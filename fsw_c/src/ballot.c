/* Ballot: a verdict that a single odd sample cannot bring about. Level 0..64, cannot overflow. */
#include "stages.h"

static const uint16_t full = 64;

void mrd_vote(mrd_ballot *ballot, uint16_t against)
{
    if (against) {
        ballot->level = ballot->level > full - 4u ? full : (uint16_t)(ballot->level + 4u);
    } else if (ballot->level != 0u) {
        ballot->level--;
    }
    if (ballot->level == full) {
        ballot->tripped = 1;
    } else if (ballot->level == 0u) {
        ballot->tripped = 0;
    }
}
