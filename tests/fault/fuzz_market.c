/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Any bytes as a Matrix Market file: no crash, entries within the matrix, faults have messages.
 * With clang's -fsanitize=fuzzer a fuzz target; without, replays the files named on the command line. */
#define _GNU_SOURCE 1
#include "fuzz_input.h"

#include "table/market.h"

#include <math.h>
#include <stdlib.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    char path[FUZZ_PATH];
    int fd = fuzz_open(data, size, path);
    lw_market market;
    lw_error error = {0};
    lw_status status = lw_market_read(path, NULL, &market, &error);
    if ((status != LW_OK) != (error.text[0] != '\0')) abort();
    for (int64_t i = 0; i < market.entries; i++)
        if (market.row[i] < 0 || market.row[i] >= market.rows || market.column[i] < 0 ||
            market.column[i] >= market.columns || !isfinite(market.value[i]) || market.line[i] < 3)
            abort();
    lw_market_clear(&market);
    fuzz_close(fd);
    return 0;
}
