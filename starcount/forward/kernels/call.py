"""Calling a density law by its C address from compiled code, so that a kernel knows no law by name."""

from llvmlite import ir
from numba import types
from numba.extending import intrinsic


@intrinsic
def call_law(typing_context, address, n, theta, R, cos_phi, sin_phi, z, out):
    """Call the function at ``address`` (see ``galaxy.law``) with contiguous float64 arrays."""
    arrays = (theta, R, cos_phi, sin_phi, z, out)
    if not all(isinstance(array, types.Array) for array in arrays):
        return None
    signature = types.void(types.intp, types.intp, *arrays)

    def generate(context, builder, signature, args):
        double_pointer = ir.DoubleType().as_pointer()
        word = ir.IntType(64)
        function_type = ir.FunctionType(ir.VoidType(), [word] + [double_pointer] * 6)
        function = builder.inttoptr(args[0], function_type.as_pointer())
        pointers = [
            builder.bitcast(context.make_array(kind)(context, builder, value).data, double_pointer)
            for kind, value in zip(signature.args[2:], args[2:], strict=True)
        ]
        builder.call(function, [args[1], *pointers])
        return context.get_dummy_value()

    return signature, generate
