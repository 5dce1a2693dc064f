/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The bounded list of findings. Owned by whoever decodes; one thread. */
#include "findings.h"

#include <string.h>

void lwd_findings_init(lwd_findings *findings)
{
    findings->n = 0;
    findings->n_error = 0;
    findings->n_warning = 0;
    findings->lost = 0;
    findings->no_memory = false;
}

void lwd_text_copy(char *out, size_t size, const char *text)
{
    size_t n = strlen(text);
    if (n >= size) {
        n = size - 1;
        while (n > 0 && ((unsigned char)text[n] & 0xc0) == 0x80) {
            n--;
        }
    }
    memmove(out, text, n);
    out[n] = '\0';
}

lwd_finding *lwd_findings_add(lwd_findings *findings, lw_severity severity, const char *code,
                              const char *pointer)
{
    findings->n_error += severity == LW_ERROR ? 1 : 0;
    findings->n_warning += severity == LW_WARNING ? 1 : 0;
    lwd_finding *item = NULL;
    if (findings->n < LWD_MAX_FINDINGS) {
        item = &findings->item[findings->n++];
    } else {
        findings->lost++;
        for (size_t i = findings->n; i > 0 && severity == LW_ERROR && item == NULL; i--) {
            if (findings->item[i - 1].severity != LW_ERROR) {
                item = &findings->item[i - 1];
            }
        }
    }
    if (item != NULL) {
        item->severity = severity;
        lwd_text_copy(item->code, sizeof item->code, code);
        lwd_text_copy(item->pointer, sizeof item->pointer, pointer);
        item->text[0] = '\0';
        item->expected[0] = '\0';
        item->got[0] = '\0';
    }
    return item;
}

const lwd_finding *lwd_findings_first_error(const lwd_findings *findings)
{
    for (size_t i = 0; i < findings->n; i++) {
        if (findings->item[i].severity == LW_ERROR) {
            return &findings->item[i];
        }
    }
    return NULL;
}
