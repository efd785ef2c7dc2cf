"""The product of the interaction with a few dipoles at once, in vector instructions.

Compilers do not find them in the loop over complex numbers (nor in one over real and imaginary
parts), and this loop is a fifth of a product's time; so they are spelt out, for any processor.
"""

from __future__ import annotations

from llvmlite import ir
from numba import types
from numba.extending import intrinsic

#: Complex numbers that `times` takes at once.
WIDTH = 4
_FAST = ("contract", "nsz", "reassoc")


@intrinsic
def times(typingctx, s, i, s_stride, v, j, v_stride, xy_sign, xz_sign, yz_sign, backwards):
    """Multiply `WIDTH` vectors of three components in place by symmetric matrices.

    Parameters
    ----------
    s : ndarray of float, 1D
        Real and imaginary parts in turn. Those of xx begin at `i`, those of yy, zz, xy, xz, yz
        every `s_stride` further on.
        May be of lower precision than `v`.
    v : ndarray of float, 1D
        The same for x, y, z from `j` on, every `v_stride`.
    xy_sign, xz_sign, yz_sign : float
        Factors of those components of the matrices.
    backwards : literal bool
        Whether the matrices come in the reverse order.
    """
    if not isinstance(backwards, types.BooleanLiteral):
        return None
    reverse = backwards.literal_value

    def generate(context, builder, signature, arguments):
        kinds = [signature.args[k].dtype for k in (0, 3)]
        vectors = [ir.VectorType(context.get_value_type(kind), 2 * WIDTH) for kind in kinds]
        lanes = vectors[1]
        data = [
            context.make_array(signature.args[k])(context, builder, arguments[k]).data
            for k in (0, 3)
        ]

        def pointer(array, begin, stride, number):
            shift = builder.mul(stride, ir.Constant(stride.type, number))
            place = builder.gep(data[array], [builder.add(begin, shift)])
            return builder.bitcast(place, vectors[array].as_pointer())

        def load(array, *where):
            loaded = builder.load(pointer(array, *where))
            loaded.align = kinds[array].bitwidth // 8
            return loaded if kinds[array] == kinds[1] else builder.fpext(loaded, lanes)

        def shuffled(vector, order):
            mask = ir.Constant(ir.VectorType(ir.IntType(32), len(order)), order)
            return builder.shuffle_vector(vector, vector, mask)

        def splat(value):
            one = ir.Constant(ir.IntType(32), 0)
            single = builder.insert_element(ir.Constant(lanes, ir.Undefined), value, one)
            return shuffled(single, [0] * (2 * WIDTH))

        def mul(a, b):
            return builder.fmul(a, b, flags=_FAST)

        def total(terms):
            out = terms[0]
            for term in terms[1:]:
                out = builder.fadd(out, term, flags=_FAST)
            return out

        lanes_of = range(WIDTH)[::-1] if reverse else range(WIDTH)
        real_parts = [2 * k for k in lanes_of for _ in range(2)]
        imaginary_parts = [2 * k + 1 for k in lanes_of for _ in range(2)]
        exchanged = [k ^ 1 for k in range(2 * WIDTH)]
        alternating = ir.Constant(lanes, [-1.0, 1.0] * WIDTH)

        i, s_stride, j, v_stride = (arguments[k] for k in (1, 2, 4, 5))
        matrix = [load(0, i, s_stride, c) for c in range(6)]
        for c, sign in zip((3, 4, 5), arguments[6:9], strict=True):
            matrix[c] = mul(matrix[c], splat(sign))
        parts = [(shuffled(m, real_parts), shuffled(m, imaginary_parts)) for m in matrix]
        vector = [load(1, j, v_stride, c) for c in range(3)]
        turned = [mul(shuffled(a, exchanged), alternating) for a in vector]  # i times it
        for row, columns in enumerate(((0, 3, 4), (3, 1, 5), (4, 5, 2))):
            terms = [mul(parts[m][0], vector[c]) for c, m in enumerate(columns)]
            terms += [mul(parts[m][1], turned[c]) for c, m in enumerate(columns)]
            builder.store(total(terms), pointer(1, j, v_stride, row)).align = kinds[1].bitwidth // 8
        return context.get_dummy_value()

    signature = types.void(s, i, s_stride, v, j, v_stride, xy_sign, xz_sign, yz_sign, backwards)
    return signature, generate
