"use strict";
// The network posterior with normal scatter, in the reader's own browser: the same steps as massfit/posterior, modules
// scenario, scale_grid and mixture_answer, on what the run knew of each site. Pressures in Pa.
globalThis.massfitBench = (() => {
  const NODES = { 3: [11, 11, 14], 4: [10, 10, 14, 8] };
  const [SEARCH, PASSES, HIGHEST, LEAST, SMALLEST, UNIT] = [7, 6, 8.7, 1e-8, 1e-4, 0.5];
  const RECORD_FLOOR = 0.1;
  const YEAR_DAYS = 365.2422;

  // eigenvalues and rows of eigenvectors of a symmetric 2 x 2 matrix
  const eigen2 = ([[a, b], [, c]]) => {
    const turn = 0.5 * Math.atan2(2 * b, a - c);
    const [x, y] = [Math.cos(turn), Math.sin(turn)];
    return [[a * x * x + 2 * b * x * y + c * y * y, a * y * y - 2 * b * x * y + c * x * x], [[x, y], [-y, x]]];
  };

  const product2 = (p, q) => [0, 1].map((i) => [0, 1].map((j) => p[i][0] * q[0][j] + p[i][1] * q[1][j]));
  const transpose2 = ([[a, b], [c, d]]) => [[a, c], [b, d]];
  const turned2 = (axes, matrix) => product2(product2(axes, matrix), transpose2(axes));

  // covariance of the record error, which every model at the site shares (posterior/observations.py)
  const recordCovariance = (covariance, noise, count) => {
    const l = Math.sqrt(covariance[0][0]);
    const m = covariance[1][0] / l;
    const n = Math.sqrt(covariance[1][1] - m * m);
    const root = [[l, 0], [m, n]];
    const inverse = [[1 / l, 0], [-m / (l * n), 1 / n]];
    const taken = turned2(inverse, noise);
    const share = [0, 1].map((i) => [0, 1].map((j) => (i === j ? 1 : 0) - taken[i][j] / count));
    const [values, axes] = eigen2(share);
    const kept = values.map((value) => Math.max(value, RECORD_FLOOR));
    const floored = [0, 1].map((i) => [0, 1].map((j) => kept[0] * axes[0][i] * axes[0][j] + kept[1] * axes[1][i] * axes[1][j]));
    return turned2(root, floored);
  };

  // orthonormal contrasts between the models of a site (Helmert's), after their mean
  const modelWeights = (count, known) => {
    const weights = [new Array(count).fill(1 / count)];
    for (let k = 1; k < known; k++) {
      const norm = Math.sqrt(k * (k + 1));
      weights.push(Array.from({ length: count }, (_, m) => (m < k ? 1 / norm : m === k ? -k / norm : 0)));
    }
    return weights;
  };

  // the sites that still say something, each with the models that are left
  const keptSites = (data, scenario) => {
    const off = new Set(scenario.without_models);
    const gone = new Set(scenario.without_sites);
    const kept = [];
    data.sites.forEach((name, s) => {
      const there = data.phasor[s].flatMap((value, m) => (value === null ? [] : [m]));
      const present = there.filter((m) => !off.has(data.models[m]));
      if (gone.has(name) || !present.length || (data.mean_only[s] && present.length < there.length)) return;
      kept.push({ s, present });
    });
    return kept;
  };

  const choleskyOfTruth = (count, truth) => {
    const root = Array.from({ length: count }, () => new Float64Array(count));
    for (let i = 0; i < count; i++) {
      for (let j = 0; j <= i; j++) {
        let sum = truth + (i === j ? 1 : 0);
        for (let k = 0; k < j; k++) sum -= root[i][k] * root[j][k];
        root[i][j] = i === j ? Math.sqrt(sum) : sum / root[j][j];
      }
    }
    return root;
  };

  // rows in pairs and what stands in their columns: first what no scale but that of the places touches, then the
  // groups, the models' common errors, A, and the datum
  const prepare = (data, scenario) => {
    const kept = keptSites(data, scenario);
    const members = data.members.flatMap((name, k) => (scenario.without_members.includes(name) ? [] : [k]));
    if (!kept.length || !members.length) return null;
    const models = [...new Set(kept.flatMap((site) => site.present))].sort((a, b) => a - b);
    const root = choleskyOfTruth(models.length, scenario.truth);
    const crowd = new Map();
    for (const { s } of kept) crowd.set(data.place[s], (crowd.get(data.place[s]) ?? 0) + 1);
    const shared = [...crowd].filter(([, count]) => count > 1).map(([place]) => place);
    const prior = priorScales(data, scenario, kept);
    const [years, bare, groups] = [data.year[0].length, data.unmodelled[0].length, prior.length > 3 ? data.group[0].length : 0];
    const ends = {};
    let size = 2;
    for (const [name, count] of [["year", years], ["unmodelled", bare], ["place", shared.length],
      ["group", groups], ["common", models.length], ["annual", 1]]) {
      ends[name] = [size, size + 2 * count];
      size += 2 * count;
    }
    const rows = { means: [], contrasts: [] };
    for (const { s, present } of kept) {
      const noise = data.noise[s];
      const count = present.length;
      const record = recordCovariance(data.covariance[s], noise, count);
      modelWeights(count, data.mean_only[s] ? 1 : count).forEach((weight, place) => {
        const own = [0, 1].map((i) => [0, 1].map((j) => (place ? 0 : record[i][j])));
        const weather = [0, 1].map((i) => [0, 1].map((j) => noise[i][j] / (place ? 1 : count)));
        const [values, axes] = eigen2([0, 1].map((i) => [0, 1].map((j) => own[i][j] + weather[i][j])));
        const mean = [0, 1].map((c) => weight.reduce((sum, w, m) => sum + w * data.phasor[s][present[m]][c], 0));
        const pair = { s, record: turned2(axes, own), noise: turned2(axes, weather), rows: [] };
        axes.forEach((direction, i) => {
          const common = models.map((_, n) => present.reduce((sum, m, at) => sum + weight[at] * root[models.indexOf(m)][n], 0));
          pair.rows.push({
            direction, common, variance: Math.max(values[i], 0),
            local: weight.reduce((sum, w) => sum + w * w, 0),
            value: direction[0] * mean[0] + direction[1] * mean[1],
          });
        });
        rows[place ? "contrasts" : "means"].push(pair);
      });
    }
    return { data, kept, members, models, shared, ends, size, rows, prior };
  };

  // scales of the priors, Pa; without that of the groups where no two places are left to share any scatter
  const priorScales = (data, scenario, kept) => {
    const scales = data.prior_scales.map((scale, k) => (k === 2 ? 100 * scenario.model_common_hpa : scale));
    const places = (sites) => new Set(sites.map(({ s }) => data.place[s])).size;
    const share = data.group_by_label
      ? data.group[0].some((_, g) => places(kept.filter(({ s }) => data.group[s][g] !== 0)) > 1)
      : places(kept) > 1;
    return share ? scales : scales.slice(0, 3);
  };

  // (n_row, size + 1) columns and datum of the means at an admittance a site, [re, im]
  const meanDesign = (model, admittance) => {
    const { data, ends, size, shared } = model;
    const width = size + 1;
    const table = new Float64Array(2 * model.rows.means.length * width);
    model.rows.means.forEach((pair, p) => pair.rows.forEach((row, i) => {
      const { s } = pair;
      const [re, im] = admittance[s];
      const d = row.direction;
      const annual = [d[0] * re + d[1] * im, -d[0] * im + d[1] * re];
      const start = (2 * p + i) * width;
      const put = (first, factor, values) => { table[start + first] = factor * values[0]; table[start + first + 1] = factor * values[1]; };
      put(0, data.prior.atmosphere, d);
      data.year[s].forEach((loading, y) => put(ends.year[0] + 2 * y, data.prior.year * loading, annual));
      data.unmodelled[s].forEach((loading, u) => put(ends.unmodelled[0] + 2 * u, data.prior.unmodelled * loading, d));
      shared.forEach((place, at) => put(ends.place[0] + 2 * at, place === data.place[s] ? 1 : 0, d));
      data.group[s].slice(0, (ends.group[1] - ends.group[0]) / 2).forEach((loading, g) => put(ends.group[0] + 2 * g, loading, d));
      row.common.forEach((loading, m) => put(ends.common[0] + 2 * m, loading, d));
      put(ends.annual[0], data.prior.annual, annual);
      table[start + size] = row.value;
    }));
    return table;
  };

  const contrastDesign = (model) => {
    const { ends, size } = model;
    const width = size + 1;
    const table = new Float64Array(2 * model.rows.contrasts.length * width);
    model.rows.contrasts.forEach((pair, p) => pair.rows.forEach((row, i) => {
      const start = (2 * p + i) * width;
      row.common.forEach((loading, m) => [0, 1].forEach((c) => { table[start + ends.common[0] + 2 * m + c] = loading * row.direction[c]; }));
      table[start + size] = row.value;
    }));
    return table;
  };

  // add the weighted squares of the rows of a table to the lower triangle of a matrix, columns from `first` on
  const addSquares = (matrix, width, table, weight, first) => {
    for (let r = 0; r < weight.length; r++) {
      const start = r * width;
      for (let i = first; i < width; i++) {
        const left = weight[r] * table[start + i];
        if (left === 0) continue;
        const line = i * width;
        for (let j = first; j <= i; j++) matrix[line + j] += left * table[start + j];
      }
    }
  };

  // eliminate the columns from `first` to `last` of a lower triangle; returns half the log determinant of their block
  const eliminate = (matrix, width, first, last) => {
    let [half, product] = [0, 1];
    for (let j = first; j < last; j++) {
      const pivot = matrix[j * width + j];
      product *= pivot;
      if (product > 1e150 || product < 1e-150) { half += 0.5 * Math.log(product); product = 1; }
      const inverse = 1 / pivot;
      for (let i = j + 1; i < width; i++) {
        const line = i * width;
        const factor = matrix[line + j] * inverse;
        for (let k = j + 1; k <= i; k++) matrix[line + k] -= factor * matrix[k * width + j];
      }
    }
    return half + 0.5 * Math.log(product);
  };

  // multiply columns and rows from `first` to `last` by a scale and add their prior; what stands left of column `from`
  // is done with
  const scaleBlock = (matrix, width, first, last, scale, from = first) => {
    for (let i = first; i < width; i++) {
      const line = i * width;
      const own = i < last ? scale : 1;
      if (i < last) for (let j = from; j < first; j++) matrix[line + j] *= scale;
      for (let j = first; j < Math.min(last, i + 1); j++) matrix[line + j] *= scale * own;
    }
    for (let i = first; i < last; i++) matrix[i * width + i] += 1;
  };

  const rowVariances = (model, site, local, group) => {
    const { data, shared } = model;
    const mean = new Float64Array(2 * model.rows.means.length);
    model.rows.means.forEach((pair, p) => pair.rows.forEach((row, i) => {
      mean[2 * p + i] = row.variance + local * local * row.local;
      if (!shared.includes(data.place[pair.s])) mean[2 * p + i] += site * site;
      if (data.alone[pair.s]) mean[2 * p + i] += group * group;
    }));
    return mean;
  };

  const contrastVariances = (model, local) =>
    Float64Array.from(model.rows.contrasts.flatMap((pair) => pair.rows.map((row) => row.variance + local * local * row.local)));

  const halfLogs = (variances) => {
    let sum = 0;
    for (const variance of variances) sum += 0.5 * Math.log(variance);
    return sum;
  };

  // values, and log weights of rule and prior, of the nodes of an axis: unit sinh(v) (posterior/scale_grid.py)
  const axisNodes = ({ unit, low, high }, count, prior) => {
    const step = (high - low) / (count - 1);
    return Array.from({ length: count }, (_, k) => {
      const v = low + step * k;
      const ratio = Math.max(Math.sinh(v), SMALLEST);
      const scale = unit * ratio;
      const rule = ((k === 0 || k === count - 1 ? 0.5 : 1) * step * Math.cosh(v)) / ratio;
      return [scale, Math.log(rule) + Math.log(scale / prior) - 2.5 * Math.log1p((scale / prior) ** 2 / 4)];
    });
  };

  // Walk the grid over the scales and hand every node that is wanted to `visit`, with the matrix eliminated as far as A.
  // What is eliminated stays in place, column by column, so that a solution can be traced back through it.
  const walk = (model, table, axes, visit, wanted = () => true, leave = () => {}) => {
    const { data, ends, size } = model;
    const width = size + 1;
    const contrasts = contrastDesign(model);
    const lone = model.kept.some(({ s }) => data.alone[s]);
    const spreads = axes[1].map(([local]) => {
      const variance = contrastVariances(model, local);
      const matrix = new Float64Array(width * width);
      addSquares(matrix, width, contrasts, variance.map((v) => 1 / v), ends.common[0]);
      return { matrix, half: halfLogs(variance), variance };
    });
    const [shared, start, last] = [ends.common[1] - ends.common[0], ends.common[0], width - ends.common[0]];
    const at = { model, table, contrasts, lone, first: new Float64Array(width * width), second: new Float64Array(width * width) };
    at.third = new Float64Array(last * last);
    const { first, second, third } = at;
    const groupAxis = axes[3] ?? [[0, 0]];
    let [variance, before] = [null, 0];
    for (let i = 0; i < axes[0].length; i++) {
      for (let j = 0; j < axes[1].length; j++) {
        const [site, local, spread] = [axes[0][i][0], axes[1][j][0], spreads[j]];
        for (let l = 0; l < groupAxis.length; l++) {
          const group = groupAxis[l][0];
          if (l === 0 || lone) {
            variance = rowVariances(model, site, local, group);
            first.set(spread.matrix);
            addSquares(first, width, table, variance.map((v) => 1 / v), 0);
            scaleBlock(first, width, 0, ends.place[0], 1);
            scaleBlock(first, width, ends.place[0], ends.place[1], site, 0);
            before = halfLogs(variance) + spread.half + eliminate(first, width, 0, ends.place[1]);
            Object.assign(at, { site, local, variance, spread: spread.variance });
          }
          for (let a = ends.group[0]; a < width; a++) {
            for (let b = a * width + ends.group[0]; b <= a * width + a; b++) second[b] = first[b];
          }
          scaleBlock(second, width, ends.group[0], ends.group[1], group);
          const known = axes[0][i][1] + axes[1][j][1] + groupAxis[l][1] - before - eliminate(second, width, ends.group[0], ends.group[1]);
          at.group = group;
          for (let k = 0; k < axes[2].length; k++) {
            const node = ((i * axes[1].length + j) * axes[2].length + k) * groupAxis.length + l;
            if (!wanted(node)) continue;
            const common = axes[2][k][0];
            for (let a = 0; a < last; a++) {
              const [line, from] = [a * last, (start + a) * width + start];
              const own = a < shared ? common * common : common;
              for (let b = 0; b <= a && b < shared; b++) third[line + b] = second[from + b] * own;
              for (let b = shared; b <= a; b++) third[line + b] = second[from + b];
              if (a < last - 1) third[line + a] += 1;
            }
            at.common = common;
            visit(node, known + axes[2][k][1] - eliminate(third, last, 0, shared), at);
          }
          if (lone) leave(at);
        }
        if (!lone) leave(at);
      }
    }
  };

  // log weights and moments of A on every node of the grid of one load member
  const onGrid = (model, admittance, axes) => {
    const total = axes.reduce((count, axis) => count * axis.length, 1);
    const nodes = { logWeight: new Float64Array(total), moments: new Float64Array(5 * total) };
    const { logWeight, moments } = nodes;
    const sd = model.data.prior.annual;
    const last = model.size + 1 - model.ends.common[0];
    const corner = (last - 3) * last + last - 3;
    walk(model, meanDesign(model, admittance), axes, (node, known, { third }) => {
      const [a, b, c] = [third[corner], third[corner + last], third[corner + last + 1]];
      const [x, y] = [third[corner + 2 * last], third[corner + 2 * last + 1]];
      const determinant = a * c - b * b;
      const [u, v] = [(c * x - b * y) / determinant, (a * y - b * x) / determinant];
      logWeight[node] = known - 0.5 * (Math.log(determinant) + third[corner + 2 * last + 2] - u * x - v * y);
      moments[5 * node] = sd * u;
      moments[5 * node + 1] = sd * v;
      moments[5 * node + 2] = (sd * sd * c) / determinant;
      moments[5 * node + 3] = (-sd * sd * b) / determinant;
      moments[5 * node + 4] = (sd * sd * a) / determinant;
    });
    return nodes;
  };

  const normalise = (nodes) => {
    let top = -Infinity;
    for (const value of nodes.logWeight) if (value > top) top = value;
    let sum = 0;
    nodes.weight = nodes.logWeight.map((value) => { const w = Math.exp(value - top); sum += w; return w; });
    for (let n = 0; n < nodes.weight.length; n++) nodes.weight[n] /= sum;
    return nodes;
  };

  // the nodes next to those that count; at last, where the weight falls below what counts, straight between nodes
  const axisEnds = ({ low, high }, marginal, last) => {
    const top = Math.max(...marginal);
    const height = marginal.map((value) => Math.log(Math.max(value / top, 1e-300)) - Math.log(LEAST));
    const step = (high - low) / (marginal.length - 1);
    const [first, final] = [height.findIndex((value) => value >= 0), height.findLastIndex((value) => value >= 0)];
    const [from, to] = [Math.max(first - 1, 0), Math.min(final + 1, height.length - 1)];
    if (!last) return [low + step * from, low + step * to];
    const crossing = (left, right) => (left === right ? low + step * left : low + step * (left + (height[left] / (height[left] - height[right])) * (right - left)));
    return [crossing(from, first), crossing(final, to)];
  };

  const findAxes = (model) => {
    const { data, members, prior } = model;
    const middle = data.sites.map((_, s) => [0, 1].map((c) => members.reduce((sum, k) => sum + data.admittance[k][s][c], 0) / members.length));
    let ends = prior.map((unit) => ({ unit, low: 0, high: HIGHEST }));
    for (let pass = 0; pass < PASSES; pass++) {
      const axes = ends.map((each, k) => axisNodes(each, SEARCH, prior[k]));
      const { weight } = normalise(onGrid(model, middle, axes));
      const groups = prior.length > 3 ? SEARCH : 1;
      const marginal = prior.map(() => new Array(SEARCH).fill(0));
      weight.forEach((w, n) => {
        const at = [Math.floor(n / (groups * SEARCH * SEARCH)), Math.floor(n / (groups * SEARCH)) % SEARCH, Math.floor(n / groups) % SEARCH, n % groups];
        prior.forEach((_, k) => { marginal[k][at[k]] += w; });
      });
      ends = ends.map((each, k) => {
        const unit = UNIT * marginal[k].reduce((sum, w, n) => sum + w * axes[k][n][0], 0);
        const [low, high] = axisEnds(each, marginal[k], pass === PASSES - 1).map((v) => Math.asinh((each.unit * Math.sinh(v)) / unit));
        return { unit, low, high };
      });
    }
    return ends.map((each, k) => axisNodes(each, NODES[prior.length][k], prior[k]));
  };

  const pooled = (weight, moments) => {
    const mean = [0, 0];
    const within = [0, 0, 0];
    const square = [0, 0, 0];
    for (let n = 0; n < weight.length; n++) { mean[0] += weight[n] * moments[5 * n]; mean[1] += weight[n] * moments[5 * n + 1]; }
    for (let n = 0; n < weight.length; n++) {
      const [x, y] = [moments[5 * n] - mean[0], moments[5 * n + 1] - mean[1]];
      for (let k = 0; k < 3; k++) within[k] += weight[n] * moments[5 * n + 2 + k];
      square[0] += weight[n] * x * x; square[1] += weight[n] * x * y; square[2] += weight[n] * y * y;
    }
    return { mean, within, scales: square };
  };

  // variance between the members as that of one more member about their mean
  const inflation = (count) => (count > 1 ? (count + 1) / (count - 1) : 0);

  /* Integrate a scenario: mean and covariance of A, and what regions and shares are made from. */
  const integrate = (data, scenario) => {
    const model = prepare(data, scenario);
    if (model === null) return null;
    const axes = findAxes(model);
    const members = model.members.map((k) => {
      const nodes = normalise(onGrid(model, data.admittance[k], axes));
      return { k, nodes, ...pooled(nodes.weight, nodes.moments) };
    });
    const count = members.length;
    const centre = [0, 1].map((c) => members.reduce((sum, member) => sum + member.mean[c], 0) / count);
    const between = [[0, 0], [0, 1], [1, 1]].map(([a, b]) =>
      (inflation(count) / count) * members.reduce((sum, { mean }) => sum + (mean[a] - centre[a]) * (mean[b] - centre[b]), 0));
    const covariance = [0, 1, 2].map((c) => between[c] + members.reduce((sum, m) => sum + m.within[c] + m.scales[c], 0) / count);
    return { model, axes, members, mean: centre, between, covariance };
  };

  return { YEAR_DAYS, integrate, inflation, meanDesign, walk };
})();
