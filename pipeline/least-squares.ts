/**
 * Dense linear least squares by Householder reflections, many right-hand sides at once, on flat row-major arrays that are overwritten.
 * Own code because it stands inside the search for onset and clearing, where a general matrix library cost several times as much.
 * Source: Golub & Van Loan, Matrix Computations, ch. 5 (algorithm from memory).
 */
export interface LeastSquares {
  /** [columns × rights] */
  readonly solution: Float64Array;
  /** Sum of squared residuals of each right-hand side. */
  readonly residual: Float64Array;
  /** Diagonal of (AᵀA)⁻¹: variance of each unknown for unit noise. */
  readonly varianceFactor: Float64Array;
}

/**
 * Reduces A [rows × columns] to triangular form in place and B [rows × rights] with it; returns the summed squared residual of all rights.
 * A column that is (nearly) a combination of earlier ones gets a zero on the diagonal; `solveTriangular` then leaves its unknown at zero.
 */
export function reduce(a: Float64Array, b: Float64Array, rows: number, columns: number, rights: number): number {
  if (a.length < rows * columns || b.length < rows * rights)
    throw new RangeError(`arrays too short for ${rows} x ${columns} and ${rights} right-hand sides`);
  if (rows < columns) throw new RangeError(`${rows} rows cannot determine ${columns} unknowns`);
  for (let k = 0; k < columns; k++) {
    let norm = 0;
    for (let i = k; i < rows; i++) norm += a[i * columns + k]! ** 2;
    norm = Math.sqrt(norm);
    if (norm < 1e-12) {
      a[k * columns + k] = 0;
      continue;
    }
    const head = a[k * columns + k]!;
    const alpha = head > 0 ? -norm : norm;
    const v0 = head - alpha;
    const beta = 1 / (alpha * v0); // 2/(vᵀv) = −1/(α·v0)
    for (let j = k + 1; j < columns; j++) {
      let s = v0 * a[k * columns + j]!;
      for (let i = k + 1; i < rows; i++) s += a[i * columns + k]! * a[i * columns + j]!;
      s *= beta;
      a[k * columns + j] = a[k * columns + j]! + s * v0;
      for (let i = k + 1; i < rows; i++) a[i * columns + j] = a[i * columns + j]! + s * a[i * columns + k]!;
    }
    for (let j = 0; j < rights; j++) {
      let s = v0 * b[k * rights + j]!;
      for (let i = k + 1; i < rows; i++) s += a[i * columns + k]! * b[i * rights + j]!;
      s *= beta;
      b[k * rights + j] = b[k * rights + j]! + s * v0;
      for (let i = k + 1; i < rows; i++) b[i * rights + j] = b[i * rights + j]! + s * a[i * columns + k]!;
    }
    a[k * columns + k] = alpha;
  }
  let total = 0;
  for (let i = columns * rights; i < rows * rights; i++) total += b[i]! ** 2;
  return total;
}

/** Back substitution after `reduce`. */
export function solveReduced(a: Float64Array, b: Float64Array, rows: number, columns: number, rights: number): LeastSquares {
  const solution = new Float64Array(columns * rights);
  const residual = new Float64Array(rights);
  for (let i = columns; i < rows; i++) for (let j = 0; j < rights; j++) residual[j] = residual[j]! + b[i * rights + j]! ** 2;
  const largest = Math.max(...Array.from({ length: columns }, (_, k) => Math.abs(a[k * columns + k]!)));
  const usable = (k: number) => Math.abs(a[k * columns + k]!) > 1e-10 * largest;
  for (let j = 0; j < rights; j++) {
    for (let k = columns - 1; k >= 0; k--) {
      if (!usable(k)) continue;
      let s = b[k * rights + j]!;
      for (let i = k + 1; i < columns; i++) s -= a[k * columns + i]! * solution[i * rights + j]!;
      solution[k * rights + j] = s / a[k * columns + k]!;
    }
  }
  return { solution, residual, varianceFactor: diagonalOfInverse(a, columns, usable) };
}

/** diag((RᵀR)⁻¹) from the triangle R: row norms of R⁻¹. Infinity for an unknown that nothing determines. */
function diagonalOfInverse(r: Float64Array, n: number, usable: (k: number) => boolean): Float64Array {
  const inverse = new Float64Array(n * n);
  const out = new Float64Array(n);
  for (let c = 0; c < n; c++) {
    if (!usable(c)) continue;
    inverse[c * n + c] = 1 / r[c * n + c]!;
    for (let k = c - 1; k >= 0; k--) {
      if (!usable(k)) continue;
      let s = 0;
      for (let i = k + 1; i <= c; i++) s -= r[k * n + i]! * inverse[i * n + c]!;
      inverse[k * n + c] = s / r[k * n + k]!;
    }
  }
  for (let k = 0; k < n; k++) {
    if (!usable(k)) out[k] = Number.POSITIVE_INFINITY;
    else for (let c = k; c < n; c++) out[k] = out[k]! + inverse[k * n + c]! ** 2;
  }
  return out;
}
