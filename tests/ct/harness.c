/* Poison every secret of the native kernel, run it under Valgrind's memcheck, and compare what it gives.
 *
 * To memcheck a poisoned byte is an uninitialised one: it reports each branch and each address that depends on it.
 * Source of the method: A. Langley, "ctgrind", 2010. The kernel object is linked as it is compiled for the package.
 *
 *     harness check PATH...     poison, run every shape on these paths, compare with a plain reference
 *     harness table | branch    must be reported: a look-up and a branch by a secret
 *     harness mask | declassified   must pass: a choice by mask, a branch on what was made public first
 *     harness equal PATH...     compare only, nothing is poisoned: runs without Valgrind, for paths that it does not know
 *     harness paths             name the paths that run here
 *
 * Exit: 0 equal and nothing reported, 1 wrong result, 2 usage, 3 not under Valgrind; Valgrind itself gives 9.
 */
#define _POSIX_C_SOURCE 200809L
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <valgrind/memcheck.h>

#include "_kernel.h"

#define SECRET(at, length) VALGRIND_MAKE_MEM_UNDEFINED((at), (length))
#define PUBLIC(at, length) VALGRIND_MAKE_MEM_DEFINED((at), (length))

enum { MOST = 48 };

static volatile uint8_t sink;
static uint32_t state = 2463534242u;
static int poisoned;

/* Made-up bytes: xorshift, G. Marsaglia, "Xorshift RNGs", Journal of Statistical Software 8(14), 2003. */
static uint8_t made_up(void)
{
    state ^= state << 13;
    state ^= state >> 17;
    state ^= state << 5;
    return (uint8_t)(state >> 11);
}

/* Multiply as on paper: product of polynomials, then long division by the modulus. */
static uint8_t on_paper(unsigned modulus, unsigned a, unsigned b)
{
    unsigned product = 0;
    for (int bit = 0; bit < 8; bit++) {
        if ((b >> bit) & 1) {
            product ^= a << bit;
        }
    }
    for (int bit = 14; bit >= 8; bit--) {
        if ((product >> bit) & 1) {
            product ^= modulus << (bit - 8);
        }
    }
    return (uint8_t)product;
}

/* Look a product up in a table of its field, which is made once. */
static uint8_t reference(unsigned modulus, unsigned a, unsigned b)
{
    static uint8_t *tables[512];
    if (tables[modulus] == NULL) {
        if ((tables[modulus] = malloc(65536)) == NULL) {
            exit(2);
        }
        for (unsigned n = 0; n < 65536; n++) {
            tables[modulus][n] = on_paper(modulus, n >> 8, n & 0xff);
        }
    }
    return tables[modulus][a << 8 | b];
}

/* A row of bytes that ends where its block of memory ends, so that a read beyond it is reported. */
struct row {
    uint8_t *block, *bytes, *clear;
};

static struct row make_row(size_t length, size_t offset)
{
    struct row row = {0};
    void *block = NULL;
    if (posix_memalign(&block, 64, offset + length) != 0 || (row.clear = malloc(length)) == NULL) {
        exit(2);
    }
    row.block = block;
    row.bytes = row.block + offset;
    for (size_t t = 0; t < length; t++) {
        row.bytes[t] = row.clear[t] = made_up();
    }
    if (poisoned) {
        SECRET(row.bytes, length);
    }
    return row;
}

static void drop_row(struct row row)
{
    free(row.block);
    free(row.clear);
}

static void fail(const char *operation, const char *path, size_t outs, size_t ins, size_t length)
{
    fprintf(stderr, "%s on %s is wrong: %zu outs, %zu rows, %zu bytes\n", operation, path, outs, ins, length);
    exit(1);
}

/* Outputs are dirty, poisoned and unaligned too. Rows of equal offset let large outputs bypass the cache. */
static void check_combine(enum shares_path path, unsigned modulus, size_t outs, size_t ins, size_t length, size_t shift)
{
    struct row in[MOST], out[MOST];
    const uint8_t *in_bytes[MOST];
    uint8_t *out_bytes[MOST], matrix[MOST * MOST];
    for (size_t j = 0; j < ins; j++) {
        in[j] = make_row(length, (shift + 7 * j) % 64);
        in_bytes[j] = in[j].bytes;
    }
    for (size_t i = 0; i < outs; i++) {
        out[i] = make_row(length, shift == 16 ? shift : (shift + 11 * i) % 64);
        out_bytes[i] = out[i].bytes;
        for (size_t j = 0; j < ins; j++) {
            matrix[i * ins + j] = j == 0 && shift % 2 == 0 ? 1 : made_up();
        }
    }
    shares_combine(path, modulus, out_bytes, outs, in_bytes, ins, matrix, length);
    for (size_t i = 0; i < outs; i++) {
        PUBLIC(out[i].bytes, length);
        for (size_t t = 0; t < length; t++) {
            uint8_t sum = 0;
            for (size_t j = 0; j < ins; j++) {
                sum ^= reference(modulus, matrix[i * ins + j], in[j].clear[t]);
            }
            if (sum != out[i].bytes[t]) {
                fail("combine", shares_path_name(path), outs, ins, length);
            }
        }
        drop_row(out[i]);
    }
    for (size_t j = 0; j < ins; j++) {
        drop_row(in[j]);
    }
}

static void check_project(unsigned modulus, size_t outs, size_t length, size_t shift)
{
    struct row row = make_row(length, shift % 64), out = make_row(outs, (shift + 5) % 64);
    uint8_t *matrix = malloc(outs * length);
    if (matrix == NULL) {
        exit(2);
    }
    for (size_t n = 0; n < outs * length; n++) {
        matrix[n] = made_up();
    }
    shares_project(modulus, out.bytes, outs, matrix, row.bytes, length);
    PUBLIC(out.bytes, outs);
    for (size_t i = 0; i < outs; i++) {
        uint8_t sum = 0;
        for (size_t j = 0; j < length; j++) {
            sum ^= reference(modulus, matrix[i * length + j], row.clear[j]);
        }
        if (sum != out.bytes[i]) {
            fail("project", "lanes64", outs, 1, length);
        }
    }
    free(matrix);
    drop_row(row);
    drop_row(out);
}

/* Every length class: below, at and above a register, a step, a block; one tile and several; more rows than a tile takes
 * at once. The moduli are the first, the last and the usual one of the 30. */
static void check_all(enum shares_path path)
{
    static const size_t lengths[] = {1, 7, 8, 9, 15, 16, 17, 31, 32, 33, 63, 64, 65, 96, 127, 128, 4096 + 5};
    static const size_t shapes[][2] = {{1, 1}, {1, 3}, {2, 2}, {3, 2}, {4, 3}, {5, 3}, {6, 3}, {9, 5}, {11, 1}};
    static const unsigned moduli[] = {0x11b, 0x1f9, 0x11d};
    size_t shift = 0;
    for (size_t l = 0; l < sizeof lengths / sizeof *lengths; l++) {
        for (size_t s = 0; s < sizeof shapes / sizeof *shapes; s++, shift++) {
            check_combine(path, moduli[(l + s) % 3], shapes[s][0], shapes[s][1], lengths[l], shift % 64);
        }
        check_project(moduli[shift % 3], 1 + shift % 16, lengths[l], shift);
    }
    check_combine(path, 0x11b, 2, 33, 70, 1);
    check_combine(path, 0x11b, 7, 40, 131, 2);
    check_combine(path, 0x11b, 6, 2, 2 * 16384 + 71, 3);
    check_combine(path, 0x11b, 2, 2, 4096 + 5, 16);
    check_combine(path, 0x11b, 6, 2, 2 * 16384 + 71, 16);
    check_project(0x11b, 2, 65600, 3);
}

/* 16 MiB of output, which bypass the cache as the package is shipped. */
static void check_large(enum shares_path path)
{
    check_combine(path, 0x11b, 5, 1, ((size_t)16 << 20) / 5 + 77, 16);
}

static const uint8_t table[256] = {1, 2, 3};

static __attribute__((noinline)) void store(uint8_t x)
{
    sink = x;
}

static int self_test(const char *mode)
{
    uint8_t secret[16], other[16];
    memset(secret, 0x5a, sizeof secret);
    memset(other, 0xa5, sizeof other);
    SECRET(secret, sizeof secret);
    if (strcmp(mode, "table") == 0) {
        store(table[secret[3]]);
    } else if (strcmp(mode, "branch") == 0) {
        if (secret[3] & 2) {
            store(1);
        }
    } else if (strcmp(mode, "mask") == 0) {
        uint8_t mask = (uint8_t)(0u - (secret[3] & 1u));
        uint8_t chosen = (uint8_t)((secret[4] & mask) | (other[4] & ~mask));
        PUBLIC(&chosen, sizeof chosen);
        store(chosen);
    } else if (strcmp(mode, "declassified") == 0) {
        PUBLIC(secret, sizeof secret);
        if (secret[3] & 2) {
            store(1);
        }
    } else {
        return 2;
    }
    return 0;
}

static int run_paths(int count, char **names, int large)
{
    for (int n = 0; n < count; n++) {
        enum shares_path path = 0;
        while (path < SHARES_PATHS && strcmp(names[n], shares_path_name(path)) != 0) {
            path++;
        }
        if (path == SHARES_PATHS) {
            return 2;
        }
        check_all(path);
        if (large) {
            check_large(path);
        }
        printf("%s: equal%s\n", names[n], poisoned ? ", poisoned" : "");
    }
    return 0;
}

int main(int argc, char **argv)
{
    if (argc < 2) {
        return 2;
    }
    if (strcmp(argv[1], "paths") == 0) {
        for (enum shares_path path = 0; path < SHARES_PATHS; path++) {
            if (shares_path_runs(path)) {
                puts(shares_path_name(path));
            }
        }
        return 0;
    }
    if (strcmp(argv[1], "equal") == 0) {
        return argc == 2 ? 2 : run_paths(argc - 2, argv + 2, 1);
    }
    if (!RUNNING_ON_VALGRIND) {
        fputs("not under Valgrind: nothing would be checked\n", stderr);
        return 3;
    }
    if (strcmp(argv[1], "check") == 0) {
        poisoned = 1;
        return argc == 2 ? 2 : run_paths(argc - 2, argv + 2, 0);
    }
    return self_test(argv[1]);
}
