/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/memory.h"
#include "report/data.h"

#include <string.h>

/* Options that belong to the sweep or to its folder; `takes`: the next word is their value. */
static const struct {
    const char *name;
    bool takes;
} dropped[] = {{"--dampings", true}, {"--damping", true}, {"--criteria", true},   {"--models", true},
               {"--out", true},      {"-o", true},        {"--overwrite", false}, {"--noise-factor", true}};

/* Length of the shell word at `text`: quotes and backslashes hold blanks together. */
static size_t word_length(const char *text)
{
    size_t i = 0;
    char quote = '\0';
    for (; text[i] && (quote || !strchr(" \t\n", text[i])); i++) {
        if (text[i] == '\\' && quote != '\'' && text[i + 1])
            i++;
        else if (quote ? text[i] == quote : text[i] == '\'' || text[i] == '"')
            quote = quote ? '\0' : text[i];
    }
    return i;
}

/* 0 keep, 1 drop the word, 2 drop it and the next; --name=value and -oDIR are one word. */
static int drops(const char *word, size_t length)
{
    for (size_t k = 0; k < sizeof dropped / sizeof *dropped; k++) {
        size_t known = strlen(dropped[k].name);
        if (length < known || strncmp(word, dropped[k].name, known) != 0) continue;
        if (length == known) return dropped[k].takes ? 2 : 1;
        if (dropped[k].takes && (word[known] == '=' || word[1] != '-')) return 1;
    }
    return 0;
}

char *lw_report_solve_prefix(const char *command_line)
{
    const char *in = command_line ? command_line : "leastwise sweep";
    char *prefix = lw_alloc(strlen(in) + 32, 1);
    if (prefix == NULL) return NULL;
    size_t used = 0;
    bool skip = false, command_seen = false;
    for (int word = 0; *in;) {
        in += strspn(in, " \t\n");
        size_t length = word_length(in);
        if (length == 0) break;
        int drop = word > 0 ? drops(in, length) : 0;
        if (!skip && drop == 0) {
            const char *take = in;
            size_t size = length;
            if (word == 0)
                take = "leastwise", size = 9;
            else if (!command_seen && *in != '-')
                take = "solve", size = 5, command_seen = true;
            if (used) prefix[used++] = ' ';
            memcpy(prefix + used, take, size);
            used += size;
        }
        skip = !skip && drop == 2;
        in += length;
        word++;
    }
    prefix[used] = '\0';
    return prefix;
}
