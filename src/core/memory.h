/** Allocation: overflow-checked sizes, huge pages where they pay, and a gate through which tests make the
 * k-th allocation fail (SuiteSparse, libcsv and jansson are given these functions too). */
#ifndef LW_CORE_MEMORY_H
#define LW_CORE_MEMORY_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/** count * size bytes, or NULL (overflow, no memory). count 0 gives a valid pointer. 64-byte aligned from 1
 * MiB on. */
void *lw_alloc(size_t count, size_t size);
/** The same for an array that is read in scattered order again and again: asks for huge pages from 4 MiB on. */
void *lw_alloc_scattered(size_t count, size_t size);
/** lw_alloc, zero-filled. */
void *lw_alloc_zero(size_t count, size_t size);
/** Grows or shrinks; on failure NULL and the old block stands. */
void *lw_resize(void *block, size_t count, size_t size);
/** lw_free(NULL) is safe. */
void lw_free(void *block);
/** A copy of a C string, or NULL. */
char *lw_copy_text(const char *text);

#define LW_NEW(type) ((type *)lw_alloc_zero(1, sizeof(type)))
#define LW_NEW_ARRAY(type, count) ((type *)lw_alloc((size_t)(count), sizeof(type)))
#define LW_NEW_ZEROS(type, count) ((type *)lw_alloc_zero((size_t)(count), sizeof(type)))

/** malloc/calloc/realloc/free signatures for libraries that take hooks; they pass through the same gate. */
void *lw_hook_malloc(size_t bytes);
void *lw_hook_calloc(size_t count, size_t bytes);
void *lw_hook_realloc(void *block, size_t bytes);
void lw_hook_free(void *block);

/** Tests only: called before each allocation; true makes that allocation fail. NULL removes the gate. */
typedef bool lw_memory_gate(void *state);
void lw_memory_set_gate(lw_memory_gate *gate, void *state);

/** Raises the malloc thresholds so that large work arrays are reused instead of mapped anew (design: halved
 * the time of a 20k-parameter factorization). Once, at program start. */
void lw_memory_tune(void);
/** Gives free memory between blocks back to the system: once, after reading, whose scratch would else stand
 * beside the work. */
void lw_memory_trim(void);
/** Largest resident size so far, bytes (getrusage). */
int64_t lw_memory_peak(void);
/** Memory that the system says is available now, bytes; 0 unknown. Only used to refuse before the work
 * starts. */
int64_t lw_memory_available(void);
/** a * b, or INT64_MAX where it overflows; both >= 0. */
int64_t lw_bytes(int64_t a, int64_t b);

#endif
