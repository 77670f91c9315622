/* The inner loop of shares_combine, once for each processor path: _kernel_paths.h includes this file five times.
 *
 * Before each inclusion _kernel_paths.h defines
 *     PATH        the name of the path, which begins the name of each of its functions;
 *     FEATURES    the function attribute that lets the compiler use the path's instructions;
 *     VECTOR      the type of one register, SPLIT the type of one register made ready for products;
 *     COUNT       how many registers of each row one turn of the loop takes;
 * and the functions PATH_zero, _load, _store, _stream, _add, _split and _product, all of them without a branch.
 *
 * Secret: what is loaded through in, what is stored through out, and everything worked out from it.
 * Public: the pointers, the counts, the factors. Every branch and every address below depends on these alone.
 */

/* Multiply and add for one tile: `width` rows of output from `in_count` rows of input, bytes `from` to `to`.
 *
 * `width` is a constant wherever the compiler inlines, so that all sums stay in registers. The factors of the first
 * `plain` inputs are all 1: the constant term of every polynomial, which needs no product. */
FEATURES INLINE void NAMED(tile)(size_t width, uint8_t *const *out, const uint8_t *const *in, const struct factor *factors,
                                 size_t in_count, size_t plain, size_t from, size_t to, enum mode mode,
                                 uint64_t reduction)
{
    for (size_t at = from; at < to; at += COUNT * sizeof(VECTOR)) {
        VECTOR sum[WIDTH][COUNT];
        for (size_t i = 0; i < width; i++) {
            for (size_t v = 0; v < COUNT; v++) {
                sum[i][v] = mode == ADD ? NAMED(load)(out[i] + at + v * sizeof(VECTOR)) : NAMED(zero)();
            }
        }
        for (size_t j = 0; j < plain; j++) {
            for (size_t v = 0; v < COUNT; v++) {
                VECTOR x = NAMED(load)(in[j] + at + v * sizeof(VECTOR));
                for (size_t i = 0; i < width; i++) {
                    sum[i][v] = NAMED(add)(sum[i][v], x);
                }
            }
        }
        for (size_t j = plain; j < in_count; j++) {
            SPLIT x[COUNT];
            for (size_t v = 0; v < COUNT; v++) {
                x[v] = NAMED(split)(NAMED(load)(in[j] + at + v * sizeof(VECTOR)), reduction);
            }
            for (size_t i = 0; i < width; i++) {
                for (size_t v = 0; v < COUNT; v++) {
                    sum[i][v] = NAMED(add)(sum[i][v], NAMED(product)(x[v], &factors[i * in_count + j]));
                }
            }
        }
        for (size_t i = 0; i < width; i++) {
            for (size_t v = 0; v < COUNT; v++) {
                uint8_t *place = out[i] + at + v * sizeof(VECTOR);
                if (mode == STREAM) {
                    NAMED(stream)(place, sum[i][v]);
                } else {
                    NAMED(store)(place, sum[i][v]);
                }
            }
        }
    }
}

/* One function of its own for each width, so that each can be read, and checked, in the compiled object. */
#define TILE_OF(width)                                                                                                \
    FEATURES SEPARATE void NAMED(tile_##width)(uint8_t *const *out, const uint8_t *const *in,                         \
                                               const struct factor *factors, size_t in_count, size_t plain,           \
                                               size_t from, size_t to, enum mode mode, uint64_t reduction)            \
    {                                                                                                                 \
        NAMED(tile)(width, out, in, factors, in_count, plain, from, to, mode, reduction);                             \
    }
TILE_OF(1)
TILE_OF(2)
TILE_OF(3)
TILE_OF(4)
TILE_OF(5)
#undef TILE_OF

static void NAMED(run)(size_t width, uint8_t *const *out, const uint8_t *const *in, const struct factor *factors,
                       size_t in_count, size_t plain, size_t from, size_t to, enum mode mode, uint64_t reduction)
{
    switch (width) {
    case 1: NAMED(tile_1)(out, in, factors, in_count, plain, from, to, mode, reduction); break;
    case 2: NAMED(tile_2)(out, in, factors, in_count, plain, from, to, mode, reduction); break;
    case 3: NAMED(tile_3)(out, in, factors, in_count, plain, from, to, mode, reduction); break;
    case 4: NAMED(tile_4)(out, in, factors, in_count, plain, from, to, mode, reduction); break;
    default: NAMED(tile_5)(out, in, factors, in_count, plain, from, to, mode, reduction); break;
    }
}

#undef PATH
#undef FEATURES
#undef VECTOR
#undef SPLIT
#undef COUNT
