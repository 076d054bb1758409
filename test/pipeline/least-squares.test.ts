import { inverse, Matrix, QrDecomposition } from "ml-matrix";
import { expect, it } from "vitest";
import { reduce, solveReduced } from "../../pipeline/least-squares.ts";
import { normalDeviates } from "../../pipeline/random.ts";

const normal = normalDeviates(3);
const rows = 20;
const columns = 5;
const rights = 3;
const a = Matrix.from1DArray(rows, columns, Array.from({ length: rows * columns }, normal));
const b = Matrix.from1DArray(rows, rights, Array.from({ length: rows * rights }, normal));

it("agrees with a general matrix library in solution, residual and variance factors", () => {
  const flatA = Float64Array.from(a.to1DArray());
  const flatB = Float64Array.from(b.to1DArray());
  const total = reduce(flatA, flatB, rows, columns, rights);
  const { solution, residual, varianceFactor } = solveReduced(flatA, flatB, rows, columns, rights);
  const expected = new QrDecomposition(a).solve(b);
  const left = Matrix.sub(b, a.mmul(expected));
  expect(total).toBeCloseTo(left.norm("frobenius") ** 2, 10);
  for (let j = 0; j < rights; j++) {
    expect(residual[j]).toBeCloseTo(
      left.getColumn(j).reduce((s, x) => s + x * x, 0),
      10,
    );
    for (let k = 0; k < columns; k++) expect(solution[k * rights + j]).toBeCloseTo(expected.get(k, j), 10);
  }
  const covariance = inverse(a.transpose().mmul(a));
  for (let k = 0; k < columns; k++) expect(varianceFactor[k]).toBeCloseTo(covariance.get(k, k), 10);
});

it("leaves at zero what nothing determines, and says that its variance is boundless", () => {
  const flat = Float64Array.from([1, 0, 2, 0, 3, 0]);
  const right = Float64Array.from([2, 4, 6]);
  reduce(flat, right, 3, 2, 1);
  const { solution, varianceFactor } = solveReduced(flat, right, 3, 2, 1);
  expect(solution[0]).toBeCloseTo(2, 12);
  expect(solution[1]).toBe(0);
  expect(varianceFactor[1]).toBe(Number.POSITIVE_INFINITY);
});

it("refuses fewer rows than unknowns", () => {
  expect(() => reduce(new Float64Array(2), new Float64Array(1), 1, 2, 1)).toThrow(/1 rows cannot determine 2 unknowns/);
});
