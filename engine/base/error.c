/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "base/error.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

const char *lw_status_name(lw_status status)
{
    switch (status) {
    case LW_OK: return "ok";
    case LW_OUT_OF_MEMORY: return "out of memory";
    case LW_CANCELLED: return "cancelled";
    case LW_BAD_ARGUMENT: return "bad argument";
    case LW_BAD_DATA: return "bad data";
    case LW_IO: return "file system";
    case LW_NO_CONVERGENCE: return "no convergence";
    case LW_NOT_SUPPORTED: return "not supported by the data";
    case LW_OUT_OF_RANGE: return "out of range";
    case LW_REFOLD_FAILED: return "refold failed";
    }
    return "unknown";
}

static lw_status record(lw_error *err, lw_status status, const char *file, long line,
                        const char *remedy, const char *format, va_list arguments)
{
    if (err == NULL)
        return status;
    if (err->status != LW_OK)
        return err->status;
    err->status = status;
    vsnprintf(err->message, sizeof err->message, format, arguments);
    snprintf(err->remedy, sizeof err->remedy, "%s", remedy ? remedy : "");
    err->file[0] = '\0';
    if (file != NULL) {
        size_t length = strlen(file), room = sizeof err->file - 1;
        if (length <= room)
            memcpy(err->file, file, length + 1);
        else
            snprintf(err->file, sizeof err->file, "...%s", file + (length - room + 3));
    }
    err->line = line;
    return status;
}

lw_status lw_fail(lw_error *err, lw_status status, const char *remedy, const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    lw_status result = record(err, status, NULL, 0, remedy, format, arguments);
    va_end(arguments);
    return result;
}

lw_status lw_fail_at(lw_error *err, lw_status status, const char *file, long line, const char *remedy,
                     const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    lw_status result = record(err, status, file, line, remedy, format, arguments);
    va_end(arguments);
    return result;
}

const char *lw_error_text(const lw_error *err, char *text, unsigned long size)
{
    char place[300] = "";
    if (err->file[0] != '\0' && err->line > 0)
        snprintf(place, sizeof place, "%s:%ld: ", err->file, err->line);
    else if (err->file[0] != '\0')
        snprintf(place, sizeof place, "%s: ", err->file);
    snprintf(text, size, "%s%s%s%s", place, err->message, err->remedy[0] ? "; " : "", err->remedy);
    return text;
}
