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

#include "_kernel_paths.h"

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
