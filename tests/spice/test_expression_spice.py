"""Expressions have the value that ngspice's own B sources give them at the operating point, and its AC slopes.

Outside reference: ngspice. The text is read from its listing, so that its own rewriting of numbers and of
``{parameters}`` is part of the check. 1e-9 relative: both are double precision, ngspice prints ten digits of a
constant.
"""

import numpy as np
import pytest

from transim.circuit.elements import read_listing

LEVELS = {"a": 0.7, "b": 2.5, "c": -1.2, "d": -1.7, "h": 0.4, "z": 0.0}
EXPRESSIONS = """
v(a)+v(b)*v(c) ; v(a)-v(b)-v(c) ; v(a)/v(b)/v(c) ; -v(b)^2 ; 2^3^2 ; 2^-v(a) ; 2^-v(a)^2 ; -2^2 ; 2*-v(a) ; 2--v(a)
+v(a) ; v(a)*-v(b)^2 ; v(a)*(v(b)+v(c))^2/(1+v(a)) ; v(b)**3 ; (-v(b))^2 ; (-v(b))^3 ; v(d)^3 ; v(d)^1.5 ; v(d)**3
pow(v(d),3) ; pwr(v(d),3) ; pow(v(d),2) ; v(d)^2 ; v(a)^v(b) ; 3^v(d) ; v(a)>v(b)?1:2 ; v(a)<v(b)?v(c)>0?3:4:5
v(a)<v(b)?3:v(c)>0?4:5 ; v(a)>0 && v(d)>0 ; v(a)>0 || v(d)>0 ; !v(a) ; !v(z) ; v(a)==v(a) ; v(a)!=v(b) ; v(a)<>v(b)
v(a)<=v(b) ; v(a)>=v(b) ; 1<2==1 ; 1+2<4 ; min(v(a),v(b)) ; max(v(a),v(b)) ; min(v(d),-3) ; abs(v(d)) ; sqrt(v(b))
exp(v(d)) ; exp(v(b)*100) ; ln(v(b)) ; log(v(b)) ; log10(v(b)) ; sin(v(a)) ; cos(v(a)) ; tan(v(a)) ; asin(v(h))
acos(v(h)) ; atan(v(b)) ; sinh(v(a)) ; cosh(v(a)) ; tanh(v(a)) ; asinh(v(a)) ; atanh(v(h)) ; u(v(a)) ; u(v(d)) ; u(v(z))
u2(v(h)) ; u2(v(b)) ; u2(v(d)) ; uramp(v(a)) ; uramp(v(d)) ; sgn(v(d)) ; sgn(v(z)) ; floor(v(d)) ; ceil(v(d))
floor(v(h)) ; i(va)*50 ; v(a,b)*2 ; v(b,0) ; temper ; time ; pi ; e ; 3k+1meg ; 1.5mil*1 ; 2u*1e6 ; 10p*1e12 ; 1.5e-3k
2m*1e3 ; 1/(1+exp(-v(a)/0.1)) ; {k1 - k2} * v(a) ; v(b) - {k1 + k2} ; max(v(a), {k2}) * {k1}
"""
TEXTS = [text.strip() for line in EXPRESSIONS.strip().splitlines() for text in line.split(";")]


@pytest.fixture(scope="module")
def solved(engine):
    sources = "".join(f"V{node} {node} 0 DC {level}\nR{node} {node} 0 50\n" for node, level in LEVELS.items())
    outputs = "".join(f"B{k} o{k} 0 v = {text}\n" for k, text in enumerate(TEXTS))
    slopes = "".join(
        f"alter v{node} acmag = 1\nac lin 1 1e3 1e3\nwrite laws.raw all\nalter v{node} acmag = 0\n" for node in LEVELS
    )
    deck = (
        f"* expressions\n.param k1=3 k2=0.5\n{sources}{outputs}.options temp=40\n.control\nlisting expand\n"
        f"set appendwrite\nop\nwrite laws.raw all\n{slopes}quit 0\n.endc\n.end\n"
    )
    done = engine.run(deck, name="laws", writes_raw=True)
    circuit = read_listing(done.log)
    assert circuit.refused == ()
    return {source.name: source.law for source in circuit.behaviourals}, done.plots


def evaluate(law, plot):
    bias = {f"v:{node}": plot[f"v({node})"].real for node in law.nodes}
    bias |= {f"i:{source}": plot[f"i({source})"].real for source in law.sources}
    return law.evaluate({**bias, "time": np.zeros(1)}, {"temper": 40.0})


def test_every_text_reached_ngspice(solved):
    assert len(solved[0]) == len(TEXTS) > 80


@pytest.mark.parametrize("k", range(len(TEXTS)), ids=TEXTS)
def test_value_and_slopes(solved, k):
    laws, (bias, *slopes) = solved
    dual = evaluate(laws[f"b{k}"], bias)
    assert float(np.ravel(dual.value)[0]) == pytest.approx(float(bias[f"v(o{k})"][0].real), rel=1e-9, abs=1e-12)
    for node, plot in zip(LEVELS, slopes, strict=True):
        # i(va) is the current of the source into node a, through 50 ohm
        found = float(np.ravel(dual.partial.get(f"v:{node}", 0.0))[0])
        if node == "a":
            found -= float(np.ravel(dual.partial.get("i:va", 0.0))[0]) / 50.0
        assert found == pytest.approx(float(plot[f"v(o{k})"][0].real), rel=1e-9, abs=1e-12)
