/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Errors: texts and the one function that fills them. No state. */
#include <leeway/err.h>

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

const char *lw_code_text(lw_code code)
{
    static const char *const text[] = {
#define LW_CODE_TEXT(name, words) words,
        LW_CODE_LIST(LW_CODE_TEXT)
#undef LW_CODE_TEXT
    };
    return (unsigned)code < LW_CODE_COUNT ? text[code] : "unknown code";
}

lw_code lw_fail_at(lw_err *err, lw_code code, const char *file, int line, const char *where,
                   const char *format, ...)
{
    if (err == NULL || err->code != LW_OK) {
        return err == NULL ? code : err->code;
    }
    err->code = code;
    err->file = file;
    err->line = line;
    (void)snprintf(err->where, sizeof err->where, "%s", where != NULL ? where : "");
    va_list args;
    va_start(args, format);
    (void)vsnprintf(err->msg, sizeof err->msg, format, args);
    va_end(args);
    return code;
}
