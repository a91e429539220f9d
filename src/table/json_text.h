/** The text of a JSON document as it grows. */
#ifndef LW_TABLE_JSON_TEXT_H
#define LW_TABLE_JSON_TEXT_H

#include <stdbool.h>
#include <stddef.h>

typedef struct lw_json_text {
    char *bytes; /**< lw_free by the owner */
    size_t used, room;
    bool safe;   /**< escape what could end a script element */
    bool failed; /**< memory was out */
} lw_json_text;

void lw_json_text_put(lw_json_text *text, const char *bytes, size_t length);
/** A new line, indented by two blanks a level. */
void lw_json_text_line(lw_json_text *text, int depth);
/** In quotes and escaped; the bytes are UTF-8. */
void lw_json_text_string(lw_json_text *text, const char *bytes, size_t length);

/** A copy in which every byte that is not part of well-formed UTF-8 is U+FFFD; NULL when memory is out. */
char *lw_utf8_copy(const char *text);

#endif
