/** Files that build-aux/embed turned into byte arrays at build time. Not NUL-terminated. */
#ifndef LW_REPORT_EMBEDDED_H
#define LW_REPORT_EMBEDDED_H

#include <stddef.h>

extern const unsigned char lw_embedded_page[], lw_embedded_style[], lw_embedded_d3[], lw_embedded_script[];
extern const size_t lw_embedded_page_length, lw_embedded_style_length, lw_embedded_d3_length,
    lw_embedded_script_length;

#endif
