/** Value and gradient of a formula in b1 … bn and x, by forward differentiation: exact derivatives without writing twenty by hand. */
export type Formula = (b: ArrayLike<number>, x: number, gradient: Float64Array | null) => number;

interface Dual {
  readonly v: number;
  readonly d: Float64Array;
}
type Node = (b: ArrayLike<number>, x: number) => Dual;

/** Parses + − * / unary −, parentheses, exp, cos, sin, atan, pow, pi, x and b1 … bn. Throws SyntaxError on anything else. */
export function parseFormula(text: string, parameters: number): Formula {
  const tokens = text.match(/\d+\.?\d*|[a-z]\w*|[-+*/(),]/g) ?? [];
  if (tokens.join("") !== text.replace(/\s/g, "")) throw new SyntaxError(`cannot read "${text}"`);
  let at = 0;
  /** Derivatives carried along: all, or none where only the value is asked for. */
  let carried = parameters;
  const constant = (v: number): Dual => ({ v, d: new Float64Array(carried) });
  const chain = (v: number, a: Dual, da: number, b?: Dual, db = 0): Dual => {
    const d = new Float64Array(carried);
    if (da !== 0) for (let i = 0; i < carried; i++) d[i] = da * a.d[i];
    if (b && db !== 0) for (let i = 0; i < carried; i++) d[i] += db * b.d[i];
    return { v, d };
  };
  const expect = (token: string): void => {
    if (tokens[at++] !== token) throw new SyntaxError(`"${token}" expected before token ${at} of "${text}"`);
  };
  const sum = (): Node => {
    let left = product();
    while (tokens[at] === "+" || tokens[at] === "-") {
      const sign = tokens[at++] === "+" ? 1 : -1;
      const l = left;
      const r = product();
      left = (b, x) => {
        const p = l(b, x);
        const q = r(b, x);
        return chain(p.v + sign * q.v, p, 1, q, sign);
      };
    }
    return left;
  };
  const product = (): Node => {
    let left = factor();
    while (tokens[at] === "*" || tokens[at] === "/") {
      const times = tokens[at++] === "*";
      const l = left;
      const r = factor();
      left = (b, x) => {
        const p = l(b, x);
        const q = r(b, x);
        return times ? chain(p.v * q.v, p, q.v, q, p.v) : chain(p.v / q.v, p, 1 / q.v, q, -p.v / (q.v * q.v));
      };
    }
    return left;
  };
  const factor = (): Node => {
    const token = tokens[at++];
    if (token === "-") {
      const a = factor();
      return (b, x) => {
        const p = a(b, x);
        return chain(-p.v, p, -1);
      };
    }
    if (token === "(") {
      const inner = sum();
      expect(")");
      return inner;
    }
    if (token === "pi") return () => constant(Math.PI);
    if (token === "x") return (_b, x) => constant(x);
    const parameter = /^b(\d+)$/.exec(token ?? "");
    if (parameter) {
      const k = Number(parameter[1]) - 1;
      return (b) => {
        const unit = constant(b[k]);
        unit.d[k] = 1;
        return unit;
      };
    }
    if (/^\d/.test(token ?? "")) {
      const value = Number(token);
      return () => constant(value);
    }
    return call(token ?? "the end");
  };
  const call = (name: string): Node => {
    expect("(");
    const a = sum();
    if (name === "pow") {
      expect(",");
      const e = sum();
      expect(")");
      return (b, x) => {
        const p = a(b, x);
        const q = e(b, x);
        const v = p.v ** q.v;
        const constantPower = q.d.every((d) => d === 0);
        return chain(v, p, q.v * p.v ** (q.v - 1), q, constantPower ? 0 : v * Math.log(p.v));
      };
    }
    expect(")");
    const known = unary[name];
    if (!known) throw new SyntaxError(`unknown name ${name} in "${text}"`);
    return (b, x) => {
      const p = a(b, x);
      const [v, dv] = known(p.v);
      return chain(v, p, dv);
    };
  };
  const root = sum();
  if (at !== tokens.length) throw new SyntaxError(`"${tokens[at]}" too much in "${text}"`);
  return (b, x, gradient) => {
    carried = gradient ? parameters : 0;
    const r = root(b, x);
    gradient?.set(r.d);
    return r.v;
  };
}

const unary: Record<string, (a: number) => [number, number]> = {
  exp: (a) => [Math.exp(a), Math.exp(a)],
  cos: (a) => [Math.cos(a), -Math.sin(a)],
  sin: (a) => [Math.sin(a), Math.cos(a)],
  atan: (a) => [Math.atan(a), 1 / (1 + a * a)],
};
