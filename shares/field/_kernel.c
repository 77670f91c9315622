/* A public matrix times rows of secret bytes over GF(2^8): all arithmetic on secrets that this package does natively.
 *
 * Sources. Doubling: FIPS 197, section 4.2.1 (xtime), here on the eight bytes of a word at once. A product with a
 * known factor as two look-ups by nibble in a register of 16 bytes: J. S. Plank, K. M. Greenan, E. L. Miller,
 * "Screaming Fast Galois Field Arithmetic Using Intel SIMD Instructions", FAST 2013, section 4. A product with a known
 * factor as an 8x8 matrix of bits: Intel 64 and IA-32 Architectures Software Developer's Manual, volume 2,
 * GF2P8AFFINEQB. For a fixed factor c, multiplication by c is linear over GF(2) whatever the polynomial, so each of the
 * three serves every one of the 30 irreducible polynomials of degree 8.
 *
 * Constant time. Control flow and addresses depend on public values only: lengths, counts, addresses, the modulus and
 * the matrix. A secret byte is loaded, shifted, masked, XORed, shuffled inside a register and stored, and nothing else:
 *     1. no branch, index, pointer, shift count, multiplication or division takes a secret operand;
 *     2. a byte shuffle looks secret nibbles up in a register, never in memory;
 *     3. masks made from secrets cover a byte lane of a whole word (lanes_double), so there is no single truth value
 *        that a compiler could turn into a branch, and no barrier is needed.
 * Every output byte is written, whatever was there before. No allocation, no global state, no errors: the caller has
 * checked the arguments. Copies of secrets on the stack are wiped; what the compiler spills there, or leaves in
 * registers, is not. tests/ct checks all this on the compiled code.
 */
#include "_kernel.h"

#include <string.h>

#if defined(__GNUC__) && defined(__x86_64__)
#define HAVE_X86 1
#include <immintrin.h>
#elif defined(__GNUC__) && defined(__aarch64__) && defined(__ARM_NEON) && __BYTE_ORDER__ == __ORDER_LITTLE_ENDIAN__
#define HAVE_NEON 1
#include <arm_neon.h>
#endif

#if defined(__GNUC__)
#define INLINE static inline __attribute__((always_inline))
#define TARGET(features) __attribute__((target(features)))
#else
#define INLINE static inline
#endif

/* A function that stays a function, with the arguments it is written with, so that a checker finds it in the object. */
#if defined(__clang__)
#define SEPARATE static __attribute__((noinline))
#elif defined(__GNUC__)
#define SEPARATE static __attribute__((noinline, noclone))
#else
#define SEPARATE static
#endif

/* A tile is what one call of the inner loop works on: up to WIDTH rows of output, which stay in registers together,
 * from up to DEPTH rows of input, whose factors stay in the first-level cache (DEPTH * WIDTH * 64 bytes). */
#define WIDTH 5
#define DEPTH 32

/* Bytes of each row that are worked on before the next tile comes, so that DEPTH rows of input wait in the
 * second-level cache. Larger means less work on factors, smaller means less traffic. */
#define BLOCK ((size_t)16384)

/* The inner loop goes by whole steps: a cache line. */
#define STEP ((size_t)64)

/* From this many bytes of output on, the output bypasses the cache, which it would only flush. */
#ifndef STREAM_FROM
#define STREAM_FROM ((size_t)16 << 20)
#endif

/* How a tile leaves its sums: in place of what was there, the same past the cache, or added to what was there. */
enum mode { PUT, STREAM, ADD };

/* A public factor, made ready for one path: eight masks, two tables of 16 bytes, or a matrix four times. */
struct factor {
    uint64_t word[8];
};

/* Give a word of eight equal bytes. */
INLINE uint64_t repeated(unsigned byte)
{
    return UINT64_C(0x0101010101010101) * (byte & 0xff);
}

/* Multiply the eight bytes of a word by x. `reduction` repeats the low byte of the modulus.
 *
 * In a lane whose top bit was set, (top << 1) - (top >> 7) is 0x100 - 1 = 0xff, elsewhere 0: nothing is borrowed from
 * one lane to the next, and the 0x100 of the last lane falls off the end of the word. */
INLINE uint64_t lanes_double(uint64_t lanes, uint64_t reduction)
{
    uint64_t top = lanes & UINT64_C(0x8080808080808080);
    uint64_t mask = (top << 1) - (top >> 7);
    return ((lanes ^ top) << 1) ^ (mask & reduction);
}

/* Load up to eight bytes; those beyond `count` are 0. */
INLINE uint64_t lanes_load(const uint8_t *from, size_t count)
{
    uint64_t lanes = 0;
    memcpy(&lanes, from, count);
    return lanes;
}

/* Overwrite secrets in a way that the optimiser keeps: it must assume that the empty statement reads the bytes. */
static void wipe(void *at, size_t count)
{
#if defined(__GNUC__)
    memset(at, 0, count);
    __asm__ __volatile__("" : : "r"(at) : "memory");
#else
    volatile uint8_t *byte = at;
    for (size_t i = 0; i < count; i++) {
        byte[i] = 0;
    }
#endif
}

#define JOINED(path, name) path##_##name
#define EXPANDED(path, name) JOINED(path, name)
#define NAMED(name) EXPANDED(PATH, name)

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

/* ------------------------------------------------------------------------------------------------------------------
 * The face: choice of path, tiles, ends of rows. */

const char *shares_path_name(enum shares_path path)
{
    switch (path) {
    case SHARES_GFNI: return "gfni";
    case SHARES_AVX2: return "avx2";
    case SHARES_SSSE3: return "ssse3";
    case SHARES_NEON: return "neon";
    default: return "lanes64";
    }
}

int shares_path_runs(enum shares_path path)
{
    switch (path) {
#if defined(HAVE_X86)
    /* The first of these also asks the operating system whether it saves the wide registers. */
    case SHARES_AVX2: return __builtin_cpu_supports("avx2") != 0;
    case SHARES_GFNI: return __builtin_cpu_supports("avx2") && __builtin_cpu_supports("gfni");
    case SHARES_SSSE3: return __builtin_cpu_supports("ssse3") != 0;
#elif defined(HAVE_NEON)
    case SHARES_NEON: return 1;
#endif
    default: return path == SHARES_LANES64;
    }
}

static void make_factor(enum shares_path path, struct factor *factor, unsigned c, unsigned modulus)
{
    switch (path) {
#if defined(HAVE_X86)
    case SHARES_GFNI: gfni_factor(factor, c, modulus); break;
    case SHARES_AVX2:
    case SHARES_SSSE3: nibble_factor(factor, c, modulus); break;
#elif defined(HAVE_NEON)
    case SHARES_NEON: nibble_factor(factor, c, modulus); break;
#endif
    default: lanes64_factor(factor, c); break;
    }
}

/* One tile: the rows, their factors, how to leave the sums, and the modulus as lanes_double wants it. */
struct tile {
    uint8_t *const *out;
    const uint8_t *const *in;
    const struct factor *factors;
    size_t width, depth, plain;
    enum mode mode;
    uint64_t reduction;
};

/* Work on whole steps of a tile. */
static void run_steps(enum shares_path path, const struct tile *t, size_t from, size_t to)
{
#define RUN(path) path##_run(t->width, t->out, t->in, t->factors, t->depth, t->plain, from, to, t->mode, t->reduction)
    switch (path) {
#if defined(HAVE_X86)
    case SHARES_GFNI: RUN(gfni); break;
    case SHARES_AVX2: RUN(avx2); break;
    case SHARES_SSSE3: RUN(ssse3); break;
#elif defined(HAVE_NEON)
    case SHARES_NEON: RUN(neon); break;
#endif
    default: RUN(lanes64); break;
    }
#undef RUN
}

/* Work on less than a step of a tile, through copies that are a step long. */
static void run_end(enum shares_path path, const struct tile *t, size_t from, size_t count)
{
    uint8_t in_bytes[DEPTH][STEP], out_bytes[WIDTH][STEP];
    const uint8_t *in[DEPTH];
    uint8_t *out[WIDTH];
    struct tile copy = *t;
    memset(in_bytes, 0, t->depth * STEP);
    for (size_t j = 0; j < t->depth; j++) {
        memcpy(in_bytes[j], t->in[j] + from, count);
        in[j] = in_bytes[j];
    }
    for (size_t i = 0; i < t->width; i++) {
        memset(out_bytes[i], 0, STEP);
        if (t->mode == ADD) {
            memcpy(out_bytes[i], t->out[i] + from, count);
        }
        out[i] = out_bytes[i];
    }
    copy.in = in;
    copy.out = out;
    copy.mode = ADD;
    run_steps(path, &copy, 0, STEP);
    for (size_t i = 0; i < t->width; i++) {
        memcpy(t->out[i] + from, out_bytes[i], count);
    }
    wipe(in_bytes, t->depth * STEP);
    wipe(out_bytes, t->width * STEP);
}

/* Work on bytes `from` to `to` of a tile, whole steps beginning at `lead` where the piece begins before it. */
static void run_piece(enum shares_path path, const struct tile *t, size_t from, size_t to, size_t lead)
{
    if (from < lead) {
        size_t stop = lead < to ? lead : to;
        run_end(path, t, from, stop - from);
        from = stop;
    }
    size_t steps = (to - from) - (to - from) % STEP;
    run_steps(path, t, from, from + steps);
    from += steps;
    if (from < to) {
        run_end(path, t, from, to - from);
    }
}

/* Choose how many of the outputs that are left make the next tile: never one alone, whose splits nothing would share. */
static size_t tile_width(size_t left)
{
    if (left <= WIDTH) {
        return left;
    }
    return left == WIDTH + 1 ? WIDTH - 1 : WIDTH;
}

/* Count the first inputs whose factors are all 1. */
static size_t count_plain(const uint8_t *matrix, size_t in_count, size_t width, size_t depth)
{
    for (size_t j = 0; j < depth; j++) {
        for (size_t i = 0; i < width; i++) {
            if (matrix[i * in_count + j] != 1) {
                return j;
            }
        }
    }
    return depth;
}

/* Say how far the outputs begin before a multiple of STEP, if all of them are equally far; else STEP. */
static size_t common_lead(uint8_t *const *out, size_t out_count)
{
    for (size_t i = 1; i < out_count; i++) {
        if (((uintptr_t)out[i] - (uintptr_t)out[0]) % STEP != 0) {
            return STEP;
        }
    }
    return (STEP - (uintptr_t)out[0] % STEP) % STEP;
}

void shares_combine(enum shares_path path, unsigned modulus, uint8_t *const *out, size_t out_count,
                    const uint8_t *const *in, size_t in_count, const uint8_t *matrix, size_t length)
{
    struct factor factors[WIDTH * DEPTH];
    struct tile t = {.factors = factors, .reduction = repeated(modulus)};
    size_t lead = common_lead(out, out_count);
    enum mode first = PUT;
    if (lead < STEP && in_count <= DEPTH && length >= STREAM_FROM / out_count) {
        first = STREAM; /* It needs aligned addresses, so the pieces begin at multiples of a step. */
    } else {
        lead = 0;
    }
    /* The factors of a single tile are made ready once, for rows of any length. */
    size_t block = in_count <= DEPTH && out_count <= WIDTH ? length : BLOCK;
    for (size_t from = 0, to; from < length; from = to) {
        size_t span = from == 0 ? lead + block : block;
        to = span < length - from ? from + span : length;
        for (size_t i = 0; i < out_count; i += t.width) {
            t.width = tile_width(out_count - i);
            t.out = out + i;
            for (size_t j = 0; j < in_count; j += t.depth) {
                const uint8_t *corner = matrix + i * in_count + j;
                t.depth = in_count - j < DEPTH ? in_count - j : DEPTH;
                t.in = in + j;
                t.plain = count_plain(corner, in_count, t.width, t.depth);
                t.mode = j == 0 ? first : ADD;
                for (size_t n = 0; n < t.width * t.depth; n++) {
                    make_factor(path, &factors[n], corner[n / t.depth * in_count + n % t.depth], modulus);
                }
                run_piece(path, &t, from, to, lead);
            }
        }
    }
#if defined(HAVE_X86)
    if (first == STREAM) {
        _mm_sfence(); /* What bypassed the cache is in order again with what other threads see. */
    }
#endif
}

void shares_project(unsigned modulus, uint8_t *out, size_t out_count, const uint8_t *matrix, const uint8_t *row,
                    size_t length)
{
    /* sum[b] collects row[j] for the j whose public factor has bit b, eight j at a time; the powers of x come last.
     * Plain C reads a matrix of 16 x 65,600 in well under a millisecond, so there is no other path. */
    uint64_t sum[8];
    for (size_t i = 0; i < out_count; i++) {
        memset(sum, 0, sizeof sum);
        for (size_t j = 0, count; j < length; j += count) {
            count = length - j < sizeof(uint64_t) ? length - j : sizeof(uint64_t);
            uint64_t x = lanes_load(row + j, count);
            uint64_t factors = lanes_load(matrix + i * length + j, count);
            for (size_t bit = 0; bit < 8; bit++) {
                uint64_t ones = (factors >> bit) & UINT64_C(0x0101010101010101);
                sum[bit] ^= x & ((ones << 8) - ones);
            }
        }
        uint64_t total = sum[7];
        for (size_t bit = 7; bit-- > 0;) {
            total = lanes_double(total, repeated(modulus)) ^ sum[bit];
        }
        total ^= total >> 32;
        total ^= total >> 16;
        total ^= total >> 8;
        out[i] = (uint8_t)total;
    }
    wipe(sum, sizeof sum);
}
