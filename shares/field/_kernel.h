/* The two secret operations of this package as plain C. What is promised about them stands in _kernel.c. */
#ifndef SHARES_KERNEL_H
#define SHARES_KERNEL_H

#include <stddef.h>
#include <stdint.h>

/* The processor paths of shares_combine, fastest first. A build has some of them; SHARES_LANES64 is always there. */
enum shares_path { SHARES_GFNI, SHARES_AVX2, SHARES_SSSE3, SHARES_NEON, SHARES_LANES64, SHARES_PATHS };

/* Name a path in lower case: "gfni", "avx2", "ssse3", "neon" or "lanes64". */
const char *shares_path_name(enum shares_path path);

/* Say whether this build has the path and this processor can run it: 1 or 0. */
int shares_path_runs(enum shares_path path);

/* Set out[i][t] = sum over j of matrix[i * in_count + j] * in[j][t] in GF(2)[x]/(modulus), for all i and t.
 *
 * Secret: the bytes of in and out. Public: every other argument, the addresses and the matrix included.
 * Requires: a modulus from 0x100 to 0x1ff, a path that runs, no out that overlaps an in, the matrix or another out. */
void shares_combine(enum shares_path path, unsigned modulus, uint8_t *const *out, size_t out_count,
                    const uint8_t *const *in, size_t in_count, const uint8_t *matrix, size_t length);

/* Set out[i] = sum over j of matrix[i * length + j] * row[j] in GF(2)[x]/(modulus), for all i.
 *
 * Secret: the bytes of row and out. Public: every other argument, the matrix included.
 * Requires: a modulus from 0x100 to 0x1ff, no overlap of out with row or matrix. */
void shares_project(unsigned modulus, uint8_t *out, size_t out_count, const uint8_t *matrix, const uint8_t *row,
                    size_t length);

#endif
