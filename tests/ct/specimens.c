/* Functions that the checker of the disassembly must refuse, and some that it must accept: each has the arguments of a
 * tile function of the kernel, and what its name says. Nothing here is ever run. */
#include <immintrin.h>
#include <stddef.h>
#include <stdint.h>

#define ARGUMENTS uint8_t *const *out, const uint8_t *const *in, const uint8_t *factors, size_t count, size_t to
#define AVX2 __attribute__((target("avx2")))

static const uint8_t table[256] = {1, 2, 3};

void elsewhere(const uint8_t *row);

static inline __attribute__((always_inline)) AVX2 __m256i load(const uint8_t *from)
{
    return _mm256_loadu_si256((const __m256i *)(const void *)from);
}

static inline __attribute__((always_inline)) AVX2 void store(uint8_t *at, __m256i x)
{
    _mm256_storeu_si256((__m256i *)(void *)at, x);
}

AVX2 void refused_table(ARGUMENTS)
{
    for (size_t t = 0; t < to; t++) {
        out[0][t] = table[in[0][t]];
    }
    (void)factors;
    (void)count;
}

AVX2 void refused_index_into_factors(ARGUMENTS)
{
    for (size_t t = 0; t < to; t += 32) {
        store(out[0] + t, load(factors + in[count][t]));
    }
}

AVX2 void refused_index_into_row(ARGUMENTS)
{
    for (size_t t = 0; t < to; t += 32) {
        store(out[0] + t, load(in[1] + in[0][t]));
    }
    (void)factors;
    (void)count;
}

AVX2 void refused_choice_of_row(ARGUMENTS)
{
    for (size_t t = 0; t < to; t += 32) {
        store(out[0] + t, load(in[in[count][t] & 1]));
    }
    (void)factors;
}

AVX2 void refused_place_of_output(ARGUMENTS)
{
    for (size_t t = 0; t < to; t += 32) {
        store(out[0] + in[0][t], load(factors));
    }
    (void)count;
}

AVX2 void refused_branch(ARGUMENTS)
{
    for (size_t t = 0; t < to; t += 32) {
        if (in[0][t] & 1) {
            store(out[0] + t, load(in[count] + t));
        }
    }
    (void)factors;
}

AVX2 void refused_loop_count(ARGUMENTS)
{
    for (size_t t = 0; t < in[0][0]; t++) {
        store(out[0] + 32 * t, load(in[count] + 32 * t));
    }
    (void)factors;
    (void)to;
}

AVX2 void refused_branch_on_vector_mask(ARGUMENTS)
{
    for (size_t t = 0; t < to; t += 32) {
        if (_mm256_movemask_epi8(load(in[0] + t)) != 0) {
            store(out[0] + t, load(in[count] + t));
        }
    }
    (void)factors;
}

AVX2 void refused_branch_on_vector_test(ARGUMENTS)
{
    for (size_t t = 0; t < to; t += 32) {
        __m256i x = load(in[0] + t);
        if (_mm256_testz_si256(x, x)) {
            store(out[0] + t, load(in[count] + t));
        }
    }
    (void)factors;
}

AVX2 void refused_gather(ARGUMENTS)
{
    for (size_t t = 0; t < to; t += 32) {
        store(out[0] + t, _mm256_i32gather_epi32((const int *)(const void *)factors, load(in[0] + t), 1));
    }
    (void)count;
}

AVX2 void refused_vector_element_as_index(ARGUMENTS)
{
    for (size_t t = 0; t < to; t += 32) {
        int index = _mm256_extract_epi8(load(in[0] + t), 3);
        store(out[0] + t, load(factors + index));
    }
    (void)count;
}

AVX2 void refused_by_way_of_the_stack(ARGUMENTS)
{
    volatile uint8_t spilled[32];
    for (size_t t = 0; t < to; t += 32) {
        store((uint8_t *)spilled, load(in[0] + t));
        store(out[0] + t, load(factors + spilled[7]));
    }
    (void)count;
}

AVX2 void refused_division(ARGUMENTS)
{
    for (size_t t = 0; t < to; t++) {
        out[0][t] = (uint8_t)(in[0][t] / in[1][t]);
    }
    (void)factors;
    (void)count;
}

AVX2 void refused_shift_count(ARGUMENTS)
{
    for (size_t t = 0; t < to; t += 32) {
        __m256i x = load(in[0] + t);
        store(out[0] + t, _mm256_sll_epi64(load(in[count] + t), _mm256_castsi256_si128(x)));
    }
    (void)factors;
}

AVX2 void refused_call(ARGUMENTS)
{
    for (size_t t = 0; t < to; t += 32) {
        elsewhere(in[0] + t);
        store(out[0] + t, load(in[count] + t));
    }
    (void)factors;
}

AVX2 void accepted_sum(ARGUMENTS)
{
    for (size_t t = 0; t < to; t += 32) {
        __m256i sum = load(factors);
        for (size_t j = 0; j < count; j++) {
            sum = _mm256_xor_si256(sum, load(in[j] + t));
        }
        store(out[0] + t, sum);
    }
}

AVX2 void accepted_branch_on_factor(ARGUMENTS)
{
    for (size_t t = 0; t < to; t += 32) {
        if (factors[t] & 1) {
            store(out[count] + t, load(in[factors[0]] + t));
        }
    }
}
