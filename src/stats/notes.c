/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "stats/notes.h"

#include <stddef.h>

static const char *const texts[UF_NOTE_BITS] = {
    "too few replicates for an interval",
    "no spread between replicates",
    "values at or below 0 have no ratio",
    "no block holds both arms",
    "negative variance component shown as 0",
    "normal approximation",
    "too few values for an exact interval of this level",
    "correlations of the arms approximated by one common factor",
    "spread between wells unknown",
    "confounded with treatment",
    "Hill slope beyond what the doses can tell",
    "Hill slope held at 1",
    "no repeated dose: curve tested against a constant",
    "some replicates only bound the value",
    "not reached with the most replicates allowed",
    "the curve does not follow the doses",
};

const char *uf_note_text(unsigned note)
{
    for (int bit = 0; bit < UF_NOTE_BITS; bit++)
        if (note == 1u << bit)
            return texts[bit];
    return NULL;
}
