/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Mode texts: one entry per limb, signs, and class numbers where a limb has more than two inverse
 * solutions. */
#include "model.h"

#include <stdio.h>
#include <string.h>

void lw_mode_text(char *text, const lw_mode *mode)
{
    bool numbered = false;
    size_t len = 0;
    for (size_t i = 0; i < mode->count; i++) {
        numbered = numbered || mode->branch[i] > 0;
    }
    text[0] = '\0';
    for (size_t i = 0; i < mode->count && len + 8 < LW_MODE_TEXT_SIZE; i++) {
        if (numbered && i > 0) {
            text[len++] = '.';
        }
        text[len++] = mode->sign[i] > 0 ? '+' : mode->sign[i] < 0 ? '-' : '0';
        if (mode->branch[i] > 0 && mode->sign[i] != 0) {
            len += (size_t)snprintf(text + len, LW_MODE_TEXT_SIZE - len, "%u",
                                    (unsigned)mode->branch[i]);
        }
        text[len] = '\0';
    }
}

bool lw_mode_parse(lw_mode *out, const char *text, size_t n_limb)
{
    size_t n = 0;
    bool dotted = strchr(text, '.') != NULL;
    memset(out, 0, sizeof *out);
    for (const char *p = text; *p != '\0';) {
        if (n > 0 && dotted && *p++ != '.') {
            return false;
        }
        if (n >= n_limb || n >= LW_MAX_LIMBS) {
            return false;
        }
        char c = *p++;
        if (c != '+' && c != '-' && c != ' ' && c != '0') {
            return false;
        }
        out->sign[n] = c == '-' ? -1 : c == '0' ? 0 : 1;
        unsigned number = 0;
        bool digits = false;
        while (c != '0' && *p >= '0' && *p <= '9') {
            number = number * 10 + (unsigned)(*p++ - '0');
            digits = true;
            if (number == 0 || number > 60000) {
                return false;
            }
        }
        out->branch[n++] = digits ? (unsigned short)number : 0;
    }
    out->count = n;
    return n == n_limb;
}

bool lw_mode_same(const lw_mode *a, const lw_mode *b)
{
    if (a->count != b->count) {
        return false;
    }
    for (size_t i = 0; i < a->count; i++) {
        if (a->sign[i] != b->sign[i] || a->branch[i] != b->branch[i]) {
            return false;
        }
    }
    return true;
}

/* Mixed-radix number over the limbs' branches, from 1, first limb fastest. A mode that touches zero
 * somewhere has no number. */
unsigned lw_mode_number(const lw_model *model, const lw_mode *mode)
{
    unsigned long number = 0;
    unsigned long radix = 1;
    if (mode->count != model->n_limb) {
        return 0;
    }
    for (size_t i = 0; i < model->n_limb; i++) {
        const lwi_limb *limb = &model->limb[i];
        unsigned branch;
        if (mode->sign[i] == 0 ||
            !lwi_branch_from_entry(&branch, limb, mode->sign[i], mode->branch[i])) {
            return 0;
        }
        number += radix * branch;
        radix *= limb->branches > 0 ? limb->branches : 1;
        if (radix > 60000) {
            return 0;
        }
    }
    return (unsigned)number + 1;
}
