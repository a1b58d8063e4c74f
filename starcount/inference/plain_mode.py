"""How PyTensor functions are built here: node by node, with numpy and our own compiled kernels.

The time goes into a few kernels, so there is nothing to gain from compiling the rest of the graph, and both generations
of PyTensor do that slowly: the numba back end took minutes over the kernels' many arguments, the C back end needs a
compiler. Run by numpy, though, a sum or product of three arrays is computed element by element in Python, and so are
fused expressions: neither is left in the graph.
"""

from pytensor.compile.mode import Mode
from pytensor.graph.rewriting.basic import in2out, node_rewriter
from pytensor.link.vm import VMLinker
from pytensor.scalar.basic import Add, Mul
from pytensor.tensor.elemwise import Elemwise

_BEFORE_INPLACE = 49.2  # PyTensor's order of rewrites: after all merging of sums, before memory is shared


@node_rewriter([Elemwise])
def in_pairs(fgraph, node):
    """Replace a sum or product of many arrays by sums or products of two."""
    if not isinstance(node.op.scalar_op, Add | Mul) or len(node.inputs) < 3:
        return False
    total = node.inputs[0]
    for other in node.inputs[1:]:
        total = node.op(total, other)
    return [total]


PLAIN_MODE = (
    Mode(linker=VMLinker(use_cloop=False, c_thunks=False), optimizer="fast_run")
    .excluding("fusion")
    .register((in2out(in_pairs, name="in_pairs"), _BEFORE_INPLACE))
)
