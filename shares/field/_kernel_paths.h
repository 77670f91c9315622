/* How each kind of processor multiplies secret bytes by a public factor: the paths of shares_combine.
 *
 * Only _kernel.c includes this file, after the words it is written in (INLINE, TARGET, struct factor, lanes_double) and
 * with HAVE_X86 or HAVE_NEON set where they hold. For each path it defines a register's load, store, sum and product,
 * and then lets _kernel_tile.h build the inner loop from them. What is promised about secrets stands in _kernel.c.
 */

/* ------------------------------------------------------------------------------------------------------------------
 * lanes64: plain C. The multiples of x by 1, x, ..., x^7 are worked out once and shared by all factors; the bits of a
 * factor, as masks, choose among them. */

struct lanes64_multiples {
    uint64_t by[8];
};

INLINE uint64_t lanes64_zero(void)
{
    return 0;
}

INLINE uint64_t lanes64_load(const uint8_t *from)
{
    return lanes_load(from, sizeof(uint64_t));
}

INLINE void lanes64_store(uint8_t *to, uint64_t x)
{
    memcpy(to, &x, sizeof x);
}

INLINE uint64_t lanes64_add(uint64_t a, uint64_t b)
{
    return a ^ b;
}

INLINE struct lanes64_multiples lanes64_split(uint64_t x, uint64_t reduction)
{
    struct lanes64_multiples multiples;
    for (size_t bit = 0; bit < 8; bit++) {
        multiples.by[bit] = x;
        x = lanes_double(x, reduction);
    }
    return multiples;
}

INLINE uint64_t lanes64_product(struct lanes64_multiples x, const struct factor *factor)
{
    uint64_t sum = 0;
    for (size_t bit = 0; bit < 8; bit++) {
        sum ^= x.by[bit] & factor->word[bit];
    }
    return sum;
}

static void lanes64_factor(struct factor *factor, unsigned c)
{
    for (size_t bit = 0; bit < 8; bit++) {
        factor->word[bit] = UINT64_C(0) - ((c >> bit) & 1);
    }
}

#define lanes64_stream lanes64_store
#define PATH lanes64
#define FEATURES
#define VECTOR uint64_t
#define SPLIT struct lanes64_multiples
#define COUNT 8
#include "_kernel_tile.h"

/* ------------------------------------------------------------------------------------------------------------------
 * ssse3, avx2, neon: two look-ups by nibble. */

#if defined(HAVE_X86) || defined(HAVE_NEON)

/* Give in products[bit] the public product c * x^bit. */
static void list_products(uint8_t products[8], unsigned c, unsigned modulus)
{
    for (size_t bit = 0; bit < 8; bit++) {
        products[bit] = (uint8_t)c;
        c <<= 1;
        c ^= (0u - (c >> 8)) & modulus;
    }
}

/* Lay out two tables of 16 bytes: byte v of the first is c * v, byte v of the second c * 16v. Word 0 has v = 0 to 7. */
static void nibble_factor(struct factor *factor, unsigned c, unsigned modulus)
{
    uint8_t products[8];
    list_products(products, c, modulus);
    for (size_t half = 0; half < 2; half++) {
        const uint8_t *by = products + 4 * half;
        uint64_t table = (repeated(by[0]) & UINT64_C(0xff00ff00ff00ff00)) ^
                         (repeated(by[1]) & UINT64_C(0xffff0000ffff0000)) ^
                         (repeated(by[2]) & UINT64_C(0xffffffff00000000));
        factor->word[2 * half] = table;
        factor->word[2 * half + 1] = table ^ repeated(by[3]);
    }
}

#endif

#if defined(HAVE_X86)

#define SSSE3 TARGET("ssse3")

struct ssse3_nibbles {
    __m128i low, high;
};

SSSE3 INLINE __m128i ssse3_zero(void)
{
    return _mm_setzero_si128();
}

SSSE3 INLINE __m128i ssse3_load(const uint8_t *from)
{
    return _mm_loadu_si128((const __m128i *)(const void *)from);
}

SSSE3 INLINE void ssse3_store(uint8_t *to, __m128i x)
{
    _mm_storeu_si128((__m128i *)(void *)to, x);
}

SSSE3 INLINE void ssse3_stream(uint8_t *to, __m128i x)
{
    _mm_stream_si128((__m128i *)(void *)to, x);
}

SSSE3 INLINE __m128i ssse3_add(__m128i a, __m128i b)
{
    return _mm_xor_si128(a, b);
}

SSSE3 INLINE struct ssse3_nibbles ssse3_split(__m128i x, uint64_t reduction)
{
    (void)reduction;
    const __m128i nibble = _mm_set1_epi8(0x0f);
    return (struct ssse3_nibbles){_mm_and_si128(x, nibble), _mm_and_si128(_mm_srli_epi64(x, 4), nibble)};
}

SSSE3 INLINE __m128i ssse3_product(struct ssse3_nibbles x, const struct factor *factor)
{
    __m128i low = _mm_loadu_si128((const __m128i *)(const void *)&factor->word[0]);
    __m128i high = _mm_loadu_si128((const __m128i *)(const void *)&factor->word[2]);
    return _mm_xor_si128(_mm_shuffle_epi8(low, x.low), _mm_shuffle_epi8(high, x.high));
}

#define PATH ssse3
#define FEATURES SSSE3
#define VECTOR __m128i
#define SPLIT struct ssse3_nibbles
#define COUNT 2
#include "_kernel_tile.h"

#define AVX2 TARGET("avx2")

struct avx2_nibbles {
    __m256i low, high;
};

AVX2 INLINE __m256i avx2_zero(void)
{
    return _mm256_setzero_si256();
}

AVX2 INLINE __m256i avx2_load(const uint8_t *from)
{
    return _mm256_loadu_si256((const __m256i *)(const void *)from);
}

AVX2 INLINE void avx2_store(uint8_t *to, __m256i x)
{
    _mm256_storeu_si256((__m256i *)(void *)to, x);
}

AVX2 INLINE void avx2_stream(uint8_t *to, __m256i x)
{
    _mm256_stream_si256((__m256i *)(void *)to, x);
}

AVX2 INLINE __m256i avx2_add(__m256i a, __m256i b)
{
    return _mm256_xor_si256(a, b);
}

AVX2 INLINE struct avx2_nibbles avx2_split(__m256i x, uint64_t reduction)
{
    (void)reduction;
    const __m256i nibble = _mm256_set1_epi8(0x0f);
    return (struct avx2_nibbles){_mm256_and_si256(x, nibble), _mm256_and_si256(_mm256_srli_epi64(x, 4), nibble)};
}

AVX2 INLINE __m256i avx2_product(struct avx2_nibbles x, const struct factor *factor)
{
    __m256i low = _mm256_broadcastsi128_si256(_mm_loadu_si128((const __m128i *)(const void *)&factor->word[0]));
    __m256i high = _mm256_broadcastsi128_si256(_mm_loadu_si128((const __m128i *)(const void *)&factor->word[2]));
    return _mm256_xor_si256(_mm256_shuffle_epi8(low, x.low), _mm256_shuffle_epi8(high, x.high));
}

#define PATH avx2
#define FEATURES AVX2
#define VECTOR __m256i
#define SPLIT struct avx2_nibbles
#define COUNT 2
#include "_kernel_tile.h"

/* ------------------------------------------------------------------------------------------------------------------
 * gfni: one instruction multiplies 32 bytes by a matrix of bits. Valgrind does not know it, so tests/ct builds this
 * file once more with the macros GFNI and AFFINE replaced by a model of the published pseudo-code. */

#ifndef GFNI
#define GFNI TARGET("avx2,gfni")
#define AFFINE(x, matrix) _mm256_gf2p8affine_epi64_epi8((x), (matrix), 0)
#endif

#define gfni_zero avx2_zero
#define gfni_load avx2_load
#define gfni_store avx2_store
#define gfni_stream avx2_stream
#define gfni_add avx2_add

GFNI INLINE __m256i gfni_split(__m256i x, uint64_t reduction)
{
    (void)reduction;
    return x;
}

GFNI INLINE __m256i gfni_product(__m256i x, const struct factor *factor)
{
    return AFFINE(x, _mm256_loadu_si256((const __m256i *)(const void *)&factor->word[0]));
}

/* Bit i of a result byte is the parity of byte 7 - i of the matrix AND the operand, so bit b of that byte of the matrix
 * is bit i of c * x^b. */
static void gfni_factor(struct factor *factor, unsigned c, unsigned modulus)
{
    uint8_t products[8];
    uint64_t matrix = 0;
    list_products(products, c, modulus);
    for (size_t i = 0; i < 8; i++) {
        for (size_t b = 0; b < 8; b++) {
            matrix |= (uint64_t)((products[b] >> i) & 1) << (8 * (7 - i) + b);
        }
    }
    for (size_t copy = 0; copy < 4; copy++) {
        factor->word[copy] = matrix;
    }
}

#define PATH gfni
#define FEATURES GFNI
#define VECTOR __m256i
#define SPLIT __m256i
#define COUNT 2
#include "_kernel_tile.h"

#elif defined(HAVE_NEON)

struct neon_nibbles {
    uint8x16_t low, high;
};

INLINE uint8x16_t neon_zero(void)
{
    return vdupq_n_u8(0);
}

INLINE uint8x16_t neon_load(const uint8_t *from)
{
    return vld1q_u8(from);
}

INLINE void neon_store(uint8_t *to, uint8x16_t x)
{
    vst1q_u8(to, x);
}

INLINE uint8x16_t neon_add(uint8x16_t a, uint8x16_t b)
{
    return veorq_u8(a, b);
}

INLINE struct neon_nibbles neon_split(uint8x16_t x, uint64_t reduction)
{
    (void)reduction;
    return (struct neon_nibbles){vandq_u8(x, vdupq_n_u8(0x0f)), vshrq_n_u8(x, 4)};
}

INLINE uint8x16_t neon_product(struct neon_nibbles x, const struct factor *factor)
{
    uint8x16_t low = vreinterpretq_u8_u64(vld1q_u64(&factor->word[0]));
    uint8x16_t high = vreinterpretq_u8_u64(vld1q_u64(&factor->word[2]));
    return veorq_u8(vqtbl1q_u8(low, x.low), vqtbl1q_u8(high, x.high));
}

#define neon_stream neon_store
#define PATH neon
#define FEATURES
#define VECTOR uint8x16_t
#define SPLIT struct neon_nibbles
#define COUNT 4
#include "_kernel_tile.h"

#endif
