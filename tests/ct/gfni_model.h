/* Force-included before _kernel.c, so that the path "gfni" runs, and can be poisoned, on any x86-64 with AVX2.
 *
 * The one instruction that Valgrind does not know is replaced by a model of its published pseudo-code: Intel 64 and
 * IA-32 Architectures Software Developer's Manual, volume 2, GF2P8AFFINEQB:
 *     define parity(x): the XOR of the eight bits of x
 *     define affine_byte(matrix, byte, imm8): bit i of the result is parity(matrix.byte[7 - i] AND byte) XOR imm8.bit[i]
 *     in each 64 bits, each byte of the first source goes through affine_byte with the 64 bits of the second.
 * Everything around the instruction stays as it is shipped. The output bypasses the cache from 4 KiB on, instead of from
 * 16 MiB on, so that this is run as well.
 */
#include <immintrin.h>
#include <stdint.h>

#define STREAM_FROM ((size_t)4096)
#define GFNI __attribute__((target("avx2")))
#define AFFINE(x, matrix) model_affine((x), (matrix))

static inline uint8_t model_parity(uint8_t x)
{
    x ^= (uint8_t)(x >> 4);
    x ^= (uint8_t)(x >> 2);
    x ^= (uint8_t)(x >> 1);
    return x & 1;
}

GFNI static inline __attribute__((always_inline)) __m256i model_affine(__m256i x, __m256i matrix)
{
    uint8_t source[32], rows[32], result[32];
    _mm256_storeu_si256((__m256i *)(void *)source, x);
    _mm256_storeu_si256((__m256i *)(void *)rows, matrix);
    for (int byte = 0; byte < 32; byte++) {
        result[byte] = 0;
        for (int bit = 0; bit < 8; bit++) {
            uint8_t row = rows[byte / 8 * 8 + 7 - bit];
            result[byte] |= (uint8_t)(model_parity(row & source[byte]) << bit);
        }
    }
    return _mm256_loadu_si256((const __m256i *)(const void *)result);
}
