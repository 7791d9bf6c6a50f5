"""A formula from a stranger runs no code, reaches only columns and named functions, and hangs nothing."""

import time

import pytest

from bayesmed.core.errors import BayesmedError, FormulaError
from bayesmed.study.observe import observe

ATTACKS = [
    # calls and names
    "__import__('os').system('touch {target}')",
    "I(__import__('os').system('touch {target}'))",
    "I(open('{target}', 'w'))",
    "I(exec('1'))",
    "I(eval('1'))",
    "I(getattr(z, 'sum')())",
    "I(print)",
    "I(z if __debug__ else z)",
    "I(np)",
    "np.load('{target}')",
    "np.fromfile(z)",
    "numpy.save('{target}', z)",
    "hashed(z)",
    "lag(z)",
    "Q('z')",
    "exp10(z)",
    "C(z).__class__",
    # attributes, subscripts, comprehensions, lambdas
    "I(z.__class__)",
    "I(z.to_csv('{target}'))",
    "z.to_csv('{target}')",
    "I((z).to_csv('{target}'))",
    "I((z).__class__.__mro__[-1].__subclasses__())",
    "I(z[0])",
    "I([q for q in (1,)])",
    "I({q: 1 for q in (1,)})",
    "I((q for q in (1,)))",
    "I((lambda: 1)())",
    "I(q := 3)",
    "I((z := 3))",
    "I(*[z])",
    "I(**{})",
    "I(z, *z)",
    "I(z) if x else z",
    "I(await z)",
    "I((yield))",
    # strings
    "I(f'{z}')",
    "I(f\"{__import__('os')}\")",
    "I(b'z')",
    "I(rb'z')",
    "I('z' * 1000000000)",
    "I('%s' % z)",
    "I('''z''')",
    "C(site, contr.treatment('a'))['__import__']",
    "C(site, 'a\\'b')",
    """C(site, "']; __import__('os').system('touch {target}') #")""",
    """C(site, contr.treatment('"]; __import__("os").system("touch {target}") or __x["'))""",
    """C(site, contr.treatment("\\"] + __import__('os').system('touch {target}') + x[\\""))""",
    'C(site, levels=[\'a\', \'"] or open("{target}", "w") or ["\'])',
    # backticks
    "`z`.__class__",
    "`__import__`('os')",
    "`__import__('os').system('touch {target}')`",
    "I(`z` `z`)",
    "I(`z)",
    "I(z`)",
    # contrast codings
    "contr.treatment('a')",
    "I(contr.treatment)",
    "C(site, contr)",
    "C(site, contr.treatment)",
    "C(site, contr.custom([[1], [2], [3]]))",
    "C(site, contr.treatment(__import__('os')))",
    "C(site, contr.treatment(z))",
    "C(site, contr.treatment.__init__)",
    "C(site, contr.sum().__class__)",
    "C(site, contr.treatment(*['a']))",
    "C(site, contr.treatment(**{'base': 'a'}))",
    "C(site, {'a': [1, 2, 3]})",
    # formulaic's own ways round
    "{__import__('os').system('touch {target}')}",
    "{z}",
    "[z ~ x]",
    "z | x",
    "z %in% site",
    ".",
    "bs(z, df=4, _state={})",
    "center(z, _context=1)",
    "scale(z, center=z)",
    "bs(z, knots=z)",
    "bs(z, df=__import__('os'))",
    "bs(z, __class__=3)",
    "bs(z, lambda=3)",
    # placeholders guessed
    "v_c0",
    "v_m",
    "vv_c0",
    "I(__FORMULAIC_CONTEXT__)",
    "I(as_number(z))",
    "both(z, z)",
    "_itself(z)",
]


@pytest.mark.parametrize("attack", ATTACKS)
def test_attack_is_refused_by_name_and_does_nothing(frame, tmp_path, attack):
    target = tmp_path / "touched"
    piece = attack.replace("{target}", str(target))
    for mediator, outcome in (
        ("m ~ x", f"y ~ m + x + {piece}"),
        (f"m ~ x + {piece}", "y ~ m + x"),
        (f"{piece} ~ x", "y ~ m + x"),
        ("m ~ x", f"{piece} ~ m + x"),
    ):
        with pytest.raises(BayesmedError):
            observe(frame, exposure="x", mediator=mediator, outcome=outcome)
    assert not target.exists()


@pytest.mark.parametrize(
    ("piece", "named"),
    [
        ("I(z.mean())", "z.mean"),
        ("I(z - z.mean())", "z.mean"),
        ("sum(z)", "sum"),
        ("I(z @ z)", "@"),
        ("I(z << 3)", "<<"),
        ("I(z ^ 2)", "write '**'"),
        ("I(z and x)", "&"),
        ("I(not flag)", "not"),
        ("I(0 < z < 1)", "0 < z < 1"),
        ("I(z ** x)", "exponent"),
        ("I(2 ** 3)", "2 ** 3"),
        ("I('a')", "'a'"),
        ("I(1)", "no column"),
        ("log()", "log()"),
        ("log(z, 3)", "log(z, 3)"),
        ("bs(z, 4, 4, 4, True, 1, 2, 'raise', 3)", "too many"),
        ("bs(z, 4, df=4)", "twice"),
        ("bs(z, df=4, depth=3)", "depth"),
        ("bs(z, df='four')", "whole number"),
        ("bs(z, knots=4)", "list"),
        ("bs(z, df=4, extrapolation='none')", "extend"),
        ("poly(z, raw=1)", "True or False"),
        ("log(bs(z, df=4))", "bs(z, df=4)"),
        ("I(C(site))", "C(site)"),
        ("C(m)", "categorical of the mediator"),
        ("C(site, 3)", "contr.treatment"),
        ("maximum(z)", "2 argument"),
    ],
)
def test_refusal_names_the_piece(frame, piece, named):
    with pytest.raises(FormulaError) as caught:
        observe(frame, exposure="x", mediator="m ~ x", outcome=f"y ~ m + x + {piece}")
    assert named.lower() in str(caught.value).lower()


def test_unknown_function_lists_those_allowed_in_order(frame):
    with pytest.raises(FormulaError, match=r"evil\(\).*abs, bs, C, cc, center.*tanh"):
        observe(frame, exposure="x", mediator="m ~ x", outcome="y ~ m + evil(z)")


HEAVY = [
    "I(" + "(" * 500 + "z" + ")" * 500 + ")",
    "(" * 3000 + "z" + ")" * 3000,
    "I(" + "-" * 3000 + "z)",
    "I(" + "+".join(["z"] * 2000) + ")",
    "+".join(["z"] * 100_000),
    "I(9**9**9**9)",
    "I(z**9**9)",
    "I(z**999999999)",
    "I(z ** (10 ** 10))",
    "I((((9**20)**20)**20)**20 + z)",
    "I(" + "9" * 4000 + " + z)",
    "(x + z + age + site + flag + dose)**99999999",
    "(x + z + age + site + flag + dose)**5",
    "x*z*age*site*flag*dose*log(dose)*exp(z)*sin(z)",
    "poly(z, 1000000000)",
    "bs(z, df=1000000000)",
    "bs(z, degree=100000000)",
    "cr(z, df=1000000000)",
    "bs(z, df=50):bs(dose, df=50):bs(age, df=50)",
    "poly(z, 50):poly(dose, 50)",
    "C(I(z * 1)):C(I(dose * 1))",
    "I(" + "z*" * 90 + "9e307*9e307)",
]


@pytest.mark.parametrize("piece", HEAVY, ids=range(len(HEAVY)))
def test_heavy_formulas_are_refused_at_once(frame, piece):
    start = time.perf_counter()
    with pytest.raises(BayesmedError):
        observe(frame, exposure="x", mediator="m ~ x", outcome=f"y ~ m + x + {piece}")
    assert time.perf_counter() - start < 2


def test_many_covariates_are_no_heavy_formula(frame):
    import numpy as np

    rng = np.random.default_rng(0)
    names = [f"covariate_{i}" for i in range(60)]
    for name in names:
        frame[name] = rng.normal(size=len(frame))
    ours = observe(frame, exposure="x", mediator="m ~ x", outcome="y ~ m + x + " + " + ".join(names))
    assert len(ours.outcome_terms) == 63
