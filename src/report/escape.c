/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/memory.h"
#include "report/data.h"

#include <string.h>

char *lw_html_escape(const char *text)
{
    static const char from[] = "&<>\"'";
    static const char *const to[] = {"&amp;", "&lt;", "&gt;", "&quot;", "&#39;"};
    size_t length = text ? strlen(text) : 0, used = 0;
    char *out = lw_alloc(length + 1, 6);
    if (out == NULL) return NULL;
    for (size_t i = 0; i < length; i++) {
        const char *found = strchr(from, text[i]);
        if (found) {
            size_t size = strlen(to[found - from]);
            memcpy(out + used, to[found - from], size);
            used += size;
        } else
            out[used++] = text[i];
    }
    out[used] = '\0';
    return out;
}
