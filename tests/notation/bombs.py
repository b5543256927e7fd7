"""Short texts that ask for much: towers, sums inside sums, functions of functions, files without an end."""

PATH = "q(t)\nL = q'^2 - "
BOMBS = {
    "left tower": PATH + "(((((9^64)^64)^64)^64)^64)^64 q^2",
    "left tower frac2": PATH + "(" * 50 + "1e-300" + "^64)" * 50 + " q^2",
    "multinomial": "q(t)\nL=q'^2 - (a+b+c+d1+e+f+g+h)^64\n"
    + "".join(f"{c}=1\n" for c in ("a", "b", "c", "d1", "e", "f", "g", "h")),
    "products of sums": PATH + "(q+a+b)^2" * 60 + "\na=1;b=2",
    "nested sums": "r[64](t)\nL = r'.r' - sum_a sum_b sum_c sum_d r[a] r[b] r[c] r[d]",
    "nested sums empty": "r[64](t)\nL = r'.r' - "
    + "".join(f"sum_{c} " for c in "abcdefghijk")
    + " "
    + " ".join(f"r[{c}]" for c in "abcdefghijk"),
    "nested dir sums": "q(t,x,y,z)\nL = (d q)^2 - " + "".join(f"sum_{c} " for c in "abcdefghijklmnop") + "q^2",
    "nested dir contraction": "q(t,x,y,z)\nL = (d q)^2 - " + " ".join(f"d_{c} q d^{c} q" for c in "abcdefghijkl"),
    "contract 2": "r[64](t)\nL = r'.r' - " + " ".join(f"r[{c}] r[{c}]" for c in "abcdefghijklm"),
    "tensor4 sq": "r[4](t)\nL = r'.r' - (g[a,b,c,d] r[a] r[b] r[c] r[d])^16\ng = " + str([[[[1] * 4] * 4] * 4] * 4),
    "tensor 300": "r[64](t)\nL = r'.r' - h[a] r[a]\nh = " + str([1] * 6000),
    "array deep": "q(t)\nL=q'^2\ng=" + "[" * 9000 + "]" * 9000,
    "table big": "q(t)\nL=q'^2 - table([" + ",".join(f"[{i},{i * i}]" for i in range(1300)) + "], q, cubic)",
    "table nested": "q(t)\nL=q'^2 - " + "table([[0,1],[1,2]], " * 50 + "q" + ", linear)" * 50,
    "cases deep": "q(t)\nL=q'^2 - " + "{q where q<1, " * 300 + "q" + " otherwise}" * 300,
    "cases deep9": "q(t)\nL=q'^2 - " + "{q where q<1, " * 9 + "q" + " otherwise}" * 9,
    "cases cond nest": "q(t)\nL=q'^2 - " + "{q where " * 9 + "q" + "<1, q otherwise}" * 9,
    "cases comp": "q(t)\nL=q'^2 - V(V(V(V(V(V(V(V(q))))))))\nV(x)={x^2 where |x|<1, x^4 where -3<x<3, |x| otherwise}",
    "cases prod": "q(t)\nL=q'^2 - " + "{q^2 where q<%d, q otherwise}" * 100 % tuple(range(100)),
    "cases chain": "q(t)\nL=q'^2 - {q where " + "<".join(["1"] * 900) + "<q, q otherwise}",
    "cases 40 comp": "q(t)\nL=q'^2 - V(V(q))\nV(q)={"
    + ",".join(f"q^{i} where q<{i}" for i in range(1, 40))
    + ", q otherwise}",
    "braces unclosed": "q(t)\nL=q'^2 - " + "{" * 15000,
    "spaces d": "q(t)\nL=q'^2 - d" + " " * 18000 + "q",
    "long name_": "q(t)\nL=q'^2 - " + "a_" * 9500,
    "long names split": "q(t)\nL=q'^2 - "
    + "ab" * 5000
    + "\n"
    + "a=1;b=2;"
    + ";".join(f"{c}={1}" for c in ["ab" * k for k in range(1, 60)]),
    "chain defs": "q(t)\nL=q'^2 - a900\na0=q^2\n" + "\n".join(f"a{i + 1}=a{i}" for i in range(900)),
    "fn doubling": "q(t)\nL=q'^2 - a18(q)\na0(x)=sin(x)\n" + "\n".join(f"a{i + 1}(x)=a{i}(a{i}(x))" for i in range(18)),
    "fn doubling cos": "q(t)\nL=q'^2 - a18(q)\na0(x)=cos(x)+x\n"
    + "\n".join(f"a{i + 1}(x)=a{i}(x)+cos(a{i}(x))" for i in range(18)),
    "sqrt nest": "q(t)\nL=q'^2 - " + "sqrt(1+" * 55 + "q" + ")" * 55,
    "power nest": "q(t)\nL=q'^2 - " + "(1+" * 55 + "q^2" + ")^2" * 55,
    "quot nest": "q(t)\nL=q'^2 - " + "1/(1+" * 55 + "q^2" + ")" * 55,
    "abs nest": "q(t)\nL=q'^2 - " + "|1+" * 55 + "q^2" + "|" * 55,
    "measure many": PATH
    + "q^2\nlattice 2000, a = 0.1\nmeasure "
    + ", ".join(f"<q({i * 0.1:.1f}) q(0)>" for i in range(900)),
    "measure conn7": PATH
    + "q^2\nlattice 200, a=0.1\nmeasure <"
    + " ".join(f"(q({i / 10})+q({i / 10})^2)" for i in range(6))
    + ">_c",
    "measure prods": PATH + "q^2\nmeasure " + "(<q> + <q^2> + <q^3>)^60",
    "measure complex c": "psi(t) complex\nL=|psi'|^2-|psi|^2\nlattice 200,a=0.1\nmeasure "
    + "Re(<psi(0) psi(0.1) psi(0.2) psi^*(0.3) psi^*(0.4) psi^*(0.5)>_c)",
    "gap many": PATH + "q^2\nmeasure gap(" + ", ".join(f"q^{i % 60 + 1}" for i in range(900)) + ")",
    "many vars": "".join(f"q{i}(t)\n" for i in range(60))
    + "L = "
    + "+".join(f"q{i}'^2" for i in range(60))
    + " - ("
    + "+".join(f"q{i}" for i in range(60))
    + ")^2",
    "many vars quartic": "".join(f"q{i}(t)\n" for i in range(6))
    + "L = "
    + "+".join(f"q{i}'^2" for i in range(6))
    + " - ("
    + "+".join(f"q{i}" for i in range(6))
    + ")^6",
    "many vars dense": "".join(f"q{i}(t)\n" for i in range(60))
    + "L = "
    + "+".join(f"q{i}'^2" for i in range(60))
    + " + ("
    + "+".join(f"q{i}'" for i in range(60))
    + ")^2 - ("
    + "+".join(f"q{i}^4" for i in range(60))
    + ")",
    "H bad": "r[40](t)\nH = p.p + (p.p)^2",
    "complex64": "psi[32](t,x,y,z) complex\nL = d_mu psi^* . d^mu psi - (psi^*.psi)^2",
    "SE pow2": "phi(t,x,y,z)\nSE = (sum_mu (phi phi(+mu) + phi(-mu)))^30",
    "source pow": "q(t)\nL=q'^2-q^2+J q\nJ(t)=(1+t+exp(t)+sin(t))^60",
    "big numbers mul": PATH + " ".join(["1e300"] * 1500) + " q^2",
    "coupling expr": PATH + "w q^2\nw = " + "(" * 50 + "9" + "^64)" * 50,
    "coupling expr2": PATH + "w q^2\nw = exp(exp(exp(exp(10))))",
    "coupling nan": PATH + "w q^2\nw = 1e300 1e300",
    "period2": "q(t) mod " + "(" * 50 + "9" + "^64)" * 50 + "\nL=q'^2-cos(q)",
    "twist": "q(t,x)\nL=(d q)^2-q^2\nlattice 20 x 20, twist x = " + "(" * 50 + "9" + "^64)" * 50,
    "units expr": PATH + "q^2\nunits " + "m^99999999999" + "/s" * 1000,
    "units str": PATH + "q^2\nunits __import__('os').system('x')",
    "file dev": PATH + 'table("/dev/zero", q, linear)',
    "file proc": PATH + 'table("/proc/self/pagemap", q, linear)',
    "file long": PATH + 'table("' + "a/" * 8000 + '", q, linear)',
    "surrogate": "q(t)\nL=q'^2-\ud800 q^2",
    "combining": "q(t)\nL=q" + "\u0307" * 5000 + "^2",
    "combining2": "q(t)\nL=q" + "\u0301" * 15000,
    "conj many": "psi(t) complex\nL=|psi'|^2-|psi" + "^*" * 3000 + "|^2",
    "neighbours": "phi(t)\nSE = phi" + "(+t)" * 3000,
    "components": "r[3](t)\nL = r" + "[1]" * 3000,
    "derivs": "q(t,x)\nL=(d q)^2 - " + "d_x " * 3000 + "q",
    "means": "q(t)\nL=q'^2-q^2\nmeasure <" + "mean " * 3000 + "q>",
    "sums": "q(t)\nL=q'^2-" + "sum_a " * 3000 + "q",
    "dots2": "r[64](t)\nL=r'.r'-" + " ".join(["r.r"] * 30),
    "supers": "q(t)\nL=q'^2-q" + "²" * 9000,
    "bars": "q(t)\nL=q'^2-" + "|q" * 4000,
    "angles": "q(t)\nL=q'^2-q^2\nmeasure " + "<" * 9000,
    "higher deriv": "q(t,x,y,z)\nL=((d q)^2 + q^2)^20",
    "unit vec": "n[3](t), n.n = 1\nL=n'.n' - " + " ".join(["n[3]^2"] * 30) + " - (n[1]+n[2])^60",
}
