/**
 * A linear network in the time domain: nodal analysis with trapezoidal companion models. Every element becomes a conductance and a current that remembers
 * the step before; the conductance matrix is factorised once per state of switches and faults and kept.
 * Source: Dommel, "Digital computer solution of electromagnetic transients in single- and multiphase networks", IEEE Trans. PAS-88 (1969); from memory.
 *
 * Nodes are numbered from 0; −1 is ground. Volt, ampere, ohm, henry, farad, second.
 */
import { LuDecomposition, Matrix } from "ml-matrix";

export type SquareMatrix = readonly (readonly number[])[];

/** Coupled series R-L from `from[k]` to `to[k]`, with an optional source voltage in series (rise from `from` to `to`). */
interface Branch {
  readonly from: readonly number[];
  readonly to: readonly number[];
  readonly conductance: Float64Array;
  /** 2L/Δt − R */
  readonly back: Float64Array;
  readonly r: SquareMatrix;
  readonly l: SquareMatrix;
  readonly source: ((t: number, k: number) => number) | undefined;
  readonly sourcePhasor: readonly { re: number; im: number }[] | undefined;
  readonly i: Float64Array;
  readonly u: Float64Array;
  readonly history: Float64Array;
}

interface Capacitor {
  readonly nodes: readonly number[];
  readonly c: SquareMatrix;
  /** 2C/Δt */
  readonly conductance: Float64Array;
  readonly i: Float64Array;
  readonly history: Float64Array;
}

interface Switch {
  readonly from: number;
  readonly to: number;
  isClosed: boolean;
}

const CLOSED_SIEMENS = 1e4;
const OPEN_SIEMENS = 1e-9;
/** To ground at every node, so that a part that hangs on nothing has a voltage. */
const LEAK_SIEMENS = 1e-10;

export class Circuit {
  readonly stepS: number;
  readonly omega: number;
  nodes = 0;
  readonly #branches: Branch[] = [];
  readonly #capacitors: Capacitor[] = [];
  readonly #switches: Switch[] = [];
  #shunt: { nodes: readonly number[]; g: SquareMatrix } | undefined;
  #shuntKey = "";
  readonly #factors = new Map<string, Float64Array>();
  v = new Float64Array(0);
  #rhs = new Float64Array(0);
  t = 0;

  constructor(stepS: number, nominalHz: number) {
    this.stepS = stepS;
    this.omega = 2 * Math.PI * nominalHz;
  }

  addNodes(count: number): number[] {
    const first = this.nodes;
    this.nodes += count;
    return Array.from({ length: count }, (_, k) => first + k);
  }

  /** @returns the branch's number, for `current` */
  addBranch(
    from: readonly number[],
    to: readonly number[],
    r: SquareMatrix,
    l: SquareMatrix,
    source?: Branch["source"],
    sourcePhasor?: Branch["sourcePhasor"],
  ): number {
    const n = from.length;
    const z = new Matrix(r.map((row, a) => row.map((x, b) => x + (2 * l[a]![b]!) / this.stepS)));
    this.#branches.push({
      from,
      to,
      r,
      l,
      conductance: flat(new LuDecomposition(z).solve(Matrix.eye(n)).to2DArray()),
      back: flat(r.map((row, a) => row.map((x, b) => (2 * l[a]![b]!) / this.stepS - x))),
      source,
      sourcePhasor,
      i: new Float64Array(n),
      u: new Float64Array(n),
      history: new Float64Array(n),
    });
    return this.#branches.length - 1;
  }

  addCapacitor(nodes: readonly number[], c: SquareMatrix): void {
    this.#capacitors.push({
      nodes,
      c,
      conductance: flat(c.map((row) => row.map((x) => (2 * x) / this.stepS))),
      i: new Float64Array(nodes.length),
      history: new Float64Array(nodes.length),
    });
  }

  /** @returns the switch's number */
  addSwitch(from: number, to: number, isClosed = true): number {
    this.#switches.push({ from, to, isClosed });
    return this.#switches.length - 1;
  }

  setSwitch(number: number, isClosed: boolean): void {
    this.#switches[number]!.isClosed = isClosed;
  }
  isClosed(number: number): boolean {
    return this.#switches[number]!.isClosed;
  }

  /** Conductances to ground and between `nodes` (a fault); undefined takes them away. */
  setShunt(shunt: { nodes: readonly number[]; g: SquareMatrix } | undefined): void {
    this.#shunt = shunt;
    this.#shuntKey = shunt ? JSON.stringify(shunt) : "";
  }

  /** Current through a branch now, from `from` to `to`. */
  current(branch: number): Float64Array {
    return this.#branches[branch]!.i;
  }
  switchCurrent(number: number): number {
    const s = this.#switches[number]!;
    return (this.#at(s.from) - this.#at(s.to)) * (s.isClosed ? CLOSED_SIEMENS : OPEN_SIEMENS);
  }

  #at(node: number): number {
    return node < 0 ? 0 : this.v[node]!;
  }

  /** Puts the network into its sinusoidal steady state at time `t`: no start-up transient. Sources must carry their phasors (peak, cosine). */
  startSteady(t: number): void {
    const n = this.nodes;
    const w = this.omega;
    const re = Matrix.zeros(n, n);
    const im = Matrix.zeros(n, n);
    const rhsRe = new Float64Array(n);
    const rhsIm = new Float64Array(n);
    const stamp = (m: Matrix, a: number, b: number, x: number) => {
      if (a >= 0 && b >= 0) m.set(a, b, m.get(a, b) + x);
    };
    const admittances = this.#branches.map((branch) =>
      complexInverse(
        branch.r,
        branch.l.map((row) => row.map((x) => x * w)),
      ),
    );
    this.#branches.forEach((branch, k) => {
      const y = admittances[k]!;
      branch.from.forEach((_, a) => {
        branch.from.forEach((_, b) => {
          for (const [m, x] of [
            [re, y.re[a]![b]!],
            [im, y.im[a]![b]!],
          ] as const) {
            stamp(m, branch.from[a]!, branch.from[b]!, x);
            stamp(m, branch.to[a]!, branch.to[b]!, x);
            stamp(m, branch.from[a]!, branch.to[b]!, -x);
            stamp(m, branch.to[a]!, branch.from[b]!, -x);
          }
          const e = branch.sourcePhasor?.[b];
          if (!e) return;
          const iRe = y.re[a]![b]! * e.re - y.im[a]![b]! * e.im;
          const iIm = y.re[a]![b]! * e.im + y.im[a]![b]! * e.re;
          for (const [node, sign] of [
            [branch.from[a]!, -1],
            [branch.to[a]!, 1],
          ] as const) {
            if (node < 0) continue;
            rhsRe[node] = rhsRe[node]! + sign * iRe;
            rhsIm[node] = rhsIm[node]! + sign * iIm;
          }
        });
      });
    });
    for (const { nodes, c } of this.#capacitors)
      for (const [k, a] of nodes.entries()) for (const [l, b] of nodes.entries()) stamp(im, a, b, w * c[k]![l]!);
    this.#stampStatic((a, b, g) => stamp(re, a, b, g));
    const big = Matrix.zeros(2 * n, 2 * n);
    big.setSubMatrix(re, 0, 0).setSubMatrix(Matrix.mul(im, -1), 0, n).setSubMatrix(im, n, 0).setSubMatrix(re, n, n);
    const x = new LuDecomposition(big).solve(Matrix.columnVector([...rhsRe, ...rhsIm])).to1DArray();
    const cos = Math.cos(w * t);
    const sin = Math.sin(w * t);
    this.t = t;
    this.v = Float64Array.from({ length: n }, (_, k) => x[k]! * cos - x[n + k]! * sin);
    this.#rhs = new Float64Array(n);
    const phasor = (node: number) => (node < 0 ? { re: 0, im: 0 } : { re: x[node]!, im: x[n + node]! });
    this.#branches.forEach((branch, k) => {
      const y = admittances[k]!;
      const drop = branch.from.map((_, a) => {
        const [p, q] = [phasor(branch.from[a]!), phasor(branch.to[a]!)];
        const e = branch.sourcePhasor?.[a] ?? { re: 0, im: 0 };
        return { re: p.re - q.re + e.re, im: p.im - q.im + e.im };
      });
      branch.from.forEach((_, a) => {
        let iRe = 0;
        let iIm = 0;
        drop.forEach((d, b) => {
          iRe += y.re[a]![b]! * d.re - y.im[a]![b]! * d.im;
          iIm += y.re[a]![b]! * d.im + y.im[a]![b]! * d.re;
        });
        branch.i[a] = iRe * cos - iIm * sin;
        branch.u[a] = drop[a]!.re * cos - drop[a]!.im * sin;
      });
    });
    for (const { nodes, c, i } of this.#capacitors) {
      nodes.forEach((_, a) => {
        i[a] = nodes.reduce((s, node, b) => {
          const p = phasor(node);
          return s + c[a]![b]! * w * (-p.im * cos - p.re * sin);
        }, 0);
      });
    }
  }

  /** One time step. */
  step(): void {
    const { v } = this;
    const rhs = this.#rhs;
    rhs.fill(0);
    const t = this.t + this.stepS;
    for (const branch of this.#branches) {
      const n = branch.from.length;
      const { history, conductance, back, i, u } = branch;
      for (let a = 0; a < n; a++) {
        let x = u[a]!;
        for (let b = 0; b < n; b++) x += back[a * n + b]! * i[b]!;
        history[a] = x;
      }
      for (let a = 0; a < n; a++) {
        let injected = 0;
        for (let b = 0; b < n; b++)
          injected += conductance[a * n + b]! * (history[b]! + (branch.source ? branch.source(t, b) : 0));
        const p = branch.from[a]!;
        const q = branch.to[a]!;
        if (p >= 0) rhs[p] = rhs[p]! - injected;
        if (q >= 0) rhs[q] = rhs[q]! + injected;
      }
    }
    for (const { nodes, conductance, i, history } of this.#capacitors) {
      const n = nodes.length;
      for (let a = 0; a < n; a++) {
        let x = i[a]!;
        for (let b = 0; b < n; b++) x += conductance[a * n + b]! * v[nodes[b]!]!;
        history[a] = x;
        rhs[nodes[a]!] = rhs[nodes[a]!]! + x;
      }
    }
    this.#solve(rhs);
    for (const branch of this.#branches) {
      const n = branch.from.length;
      const { u, i, history, conductance } = branch;
      for (let a = 0; a < n; a++)
        u[a] = this.#at(branch.from[a]!) - this.#at(branch.to[a]!) + (branch.source ? branch.source(t, a) : 0);
      for (let a = 0; a < n; a++) {
        let x = 0;
        for (let b = 0; b < n; b++) x += conductance[a * n + b]! * (u[b]! + history[b]!);
        i[a] = x;
      }
    }
    for (const { nodes, conductance, i, history } of this.#capacitors) {
      const n = nodes.length;
      for (let a = 0; a < n; a++) {
        let x = -history[a]!;
        for (let b = 0; b < n; b++) x += conductance[a * n + b]! * this.v[nodes[b]!]!;
        i[a] = x;
      }
    }
    this.t = t;
  }

  /** Switches, shunt and leaks: conductances without memory. */
  #stampStatic(add: (a: number, b: number, g: number) => void): void {
    for (const s of this.#switches) {
      const g = s.isClosed ? CLOSED_SIEMENS : OPEN_SIEMENS;
      add(s.from, s.from, g);
      add(s.to, s.to, g);
      add(s.from, s.to, -g);
      add(s.to, s.from, -g);
    }
    this.#shunt?.nodes.forEach((a, k) => {
      this.#shunt!.nodes.forEach((b, l) => {
        add(a, b, this.#shunt!.g[k]![l]!);
      });
    });
    for (let k = 0; k < this.nodes; k++) add(k, k, LEAK_SIEMENS);
  }

  /** v = G⁻¹·rhs. The inverse is kept per state: a few dozen nodes, thousands of steps per state. */
  #solve(rhs: Float64Array): void {
    const n = this.nodes;
    const inverse = this.#inverse();
    const v = new Float64Array(n);
    for (let a = 0; a < n; a++) {
      let x = 0;
      const row = a * n;
      for (let b = 0; b < n; b++) x += inverse[row + b]! * rhs[b]!;
      v[a] = x;
    }
    this.v = v;
  }

  #inverse(): Float64Array {
    const key = `${this.#switches.map((s) => (s.isClosed ? 1 : 0)).join("")}|${this.#shuntKey}`;
    const kept = this.#factors.get(key);
    if (kept) return kept;
    const g = Matrix.zeros(this.nodes, this.nodes);
    const add = (a: number, b: number, x: number) => {
      if (a >= 0 && b >= 0) g.set(a, b, g.get(a, b) + x);
    };
    for (const { from, to, conductance } of this.#branches) {
      const n = from.length;
      for (let a = 0; a < n; a++) {
        for (let b = 0; b < n; b++) {
          const x = conductance[a * n + b]!;
          add(from[a]!, from[b]!, x);
          add(to[a]!, to[b]!, x);
          add(from[a]!, to[b]!, -x);
          add(to[a]!, from[b]!, -x);
        }
      }
    }
    for (const { nodes, conductance } of this.#capacitors)
      for (const [k, a] of nodes.entries()) for (const [l, b] of nodes.entries()) add(a, b, conductance[k * nodes.length + l]!);
    this.#stampStatic(add);
    const inverse = flat(new LuDecomposition(g).solve(Matrix.eye(this.nodes)).to2DArray());
    this.#factors.set(key, inverse);
    return inverse;
  }
}

const flat = (m: SquareMatrix): Float64Array => Float64Array.from(m.flat());

/** (R + jX)⁻¹ by the real 2n × 2n system. */
function complexInverse(r: SquareMatrix, x: SquareMatrix): { re: number[][]; im: number[][] } {
  const n = r.length;
  const big = Matrix.zeros(2 * n, 2 * n);
  for (const [a, row] of r.entries()) {
    for (const [b, value] of row.entries()) {
      big.set(a, b, value);
      big.set(n + a, n + b, value);
      big.set(a, n + b, -x[a]![b]!);
      big.set(n + a, b, x[a]![b]!);
    }
  }
  const inverse = new LuDecomposition(big).solve(Matrix.eye(2 * n));
  return { re: inverse.subMatrix(0, n - 1, 0, n - 1).to2DArray(), im: inverse.subMatrix(n, 2 * n - 1, 0, n - 1).to2DArray() };
}

/** Phase matrix of a balanced three-phase element from its zero- and positive-sequence values. */
export function phaseMatrix(zero: number, positive: number): number[][] {
  const own = (zero + 2 * positive) / 3;
  const mutual = (zero - positive) / 3;
  return [0, 1, 2].map((a) => [0, 1, 2].map((b) => (a === b ? own : mutual)));
}
