/** Linear least squares of a few terms, without the rows that lie far off: one wrong row decides nothing. */

export interface RobustFit {
  /** Coefficient of each term; 0 for one that is 0 everywhere or a multiple of those before it. */
  readonly coefficients: Float64Array;
  /** 1σ of each, from the scatter of the rows that were kept. */
  readonly errors: Float64Array;
  /** Rms size of the residuals of the rows that were kept. */
  readonly rms: number;
  /** Rows that were kept. */
  readonly kept: number;
}

export interface FitRows {
  readonly count: number;
  /** Numbers a row that are kept or left out together: 3 for vectors. */
  readonly width: number;
  readonly terms: number;
  /** Writes row k: `width` values, then `width` numbers of each term, all times the row's weight. */
  readonly load: (k: number, into: Float64Array) => void;
}

/** Rows are left out whose residual is beyond so many times the median one: 5σ of a normal scalar. */
const FAR_OFF = 5 / 0.6744897501960817;
/** What rounding alone may leave of a value. */
const ROUNDING = 1e-13;
const MOST_ROUNDS = 30;
/** A term is left out if what it adds to the others is below this share of it, squared. */
const COLLINEAR = 1e-12;

/**
 * Fits value = Σ coefficient · term over the rows; those far off are left out, and the fit is made
 * again, until no more leave.
 */
export function robustFit(rows: FitRows): RobustFit {
  const residuals = new Float64Array(rows.count);
  let limit = Infinity;
  let fit = fitWithin(rows, residuals, limit);
  for (let round = 0; round < MOST_ROUNDS; round++) {
    const size = lookAtResiduals(rows, fit.coefficients, residuals);
    const next = Math.max(FAR_OFF * medianOf(residuals), ROUNDING * size);
    if (!(next < limit * (1 - 1e-9))) break;
    limit = next;
    fit = fitWithin(rows, residuals, limit);
  }
  lookAtResiduals(rows, fit.coefficients, residuals);
  let square = 0;
  let kept = 0;
  for (let k = 0; k < rows.count; k++) {
    if (residuals[k] > limit) continue;
    square += residuals[k] * residuals[k];
    kept++;
  }
  const free = Math.max(1, kept * rows.width - fit.used);
  return {
    coefficients: fit.coefficients,
    errors: fit.inverse.map((share) => Math.sqrt((share * square) / free)),
    rms: kept > 0 ? Math.sqrt(square / kept) : 0,
    kept,
  };
}

/** The lower median; 0 of no numbers. The list is not changed. */
export function medianOf(values: Float64Array): number {
  return values.length === 0 ? 0 : values.slice().sort()[(values.length - 1) >> 1];
}

/** Writes the residual of each row; returns the largest value of a row. */
function lookAtResiduals(
  { count, width, terms, load }: FitRows,
  coefficients: Float64Array,
  residuals: Float64Array,
): number {
  const row = new Float64Array(width * (terms + 1));
  let largest = 0;
  for (let k = 0; k < count; k++) {
    load(k, row);
    let square = 0;
    let size = 0;
    for (let w = 0; w < width; w++) {
      let left = row[w];
      size += left * left;
      for (let t = 0; t < terms; t++) left -= coefficients[t] * row[(t + 1) * width + w];
      square += left * left;
    }
    residuals[k] = Math.sqrt(square);
    largest = Math.max(largest, Math.sqrt(size));
  }
  return largest;
}

interface Solution {
  readonly coefficients: Float64Array;
  /** Diagonal of the inverse of the normal matrix. */
  readonly inverse: Float64Array;
  /** Terms that were not left out. */
  readonly used: number;
}

/** Least squares over the rows whose residual, as it stands, is within the limit. */
function fitWithin(rows: FitRows, residuals: Float64Array, limit: number): Solution {
  const { count, width, terms, load } = rows;
  const size = terms + 1;
  const row = new Float64Array(width * size);
  // Products of all terms with each other, and of all with the value: the last row and column.
  const products = new Float64Array(size * size);
  const place = (t: number) => (t === terms ? 0 : (t + 1) * width);
  for (let k = 0; k < count; k++) {
    if (residuals[k] > limit) continue;
    load(k, row);
    for (let a = 0; a < size; a++) {
      for (let b = 0; b < size; b++) {
        let sum = 0;
        for (let w = 0; w < width; w++) sum += row[place(a) + w] * row[place(b) + w];
        products[a * size + b] += sum;
      }
    }
  }
  return sweep(products, terms);
}

/** Elimination by sweeping one term after the other; see Goodnight 1979, Am. Stat. 33, 149. */
function sweep(products: Float64Array, terms: number): Solution {
  const size = terms + 1;
  const before = products.slice();
  const coefficients = new Float64Array(terms);
  const inverse = new Float64Array(terms);
  const used: number[] = [];
  for (let t = 0; t < terms; t++) {
    const pivot = products[t * size + t];
    if (!(pivot > COLLINEAR * before[t * size + t])) continue;
    used.push(t);
    for (let a = 0; a < size; a++) {
      for (let b = 0; b < size; b++) {
        if (a === t || b === t) continue;
        products[a * size + b] -= (products[a * size + t] * products[t * size + b]) / pivot;
      }
    }
    for (let a = 0; a < size; a++) {
      if (a === t) continue;
      products[a * size + t] /= -pivot;
      products[t * size + a] /= pivot;
    }
    products[t * size + t] = 1 / pivot;
  }
  for (const t of used) {
    coefficients[t] = products[t * size + terms];
    inverse[t] = Math.max(0, products[t * size + t]);
  }
  return { coefficients, inverse, used: used.length };
}
