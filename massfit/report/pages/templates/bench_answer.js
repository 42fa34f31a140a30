"use strict";
// From the integrated nodes to what is shown: regions, amplitude and peak day, shares of the variance. The same steps as
// massfit/posterior, modules mixture_answer and shares.
Object.assign(globalThis.massfitBench, (() => {
  const { YEAR_DAYS, inflation, meanDesign, walk } = globalThis.massfitBench;
  const [COMPONENTS, REACH, RINGS, RAYS] = [24, 7, 112, 80];
  const HEAVY = 1e-6;

  // a few normal components for the nodes of a member; nodes of like width are one
  const memberComponents = ({ nodes }, shift) => {
    const { weight, moments } = nodes;
    const size = weight.map((_, n) => Math.log(moments[5 * n + 2] + moments[5 * n + 4]));
    let centre = 0;
    let square = 0;
    weight.forEach((w, n) => { centre += w * size[n]; });
    weight.forEach((w, n) => { square += w * (size[n] - centre) ** 2; });
    const spread = Math.max(Math.sqrt(square), 1e-9);
    const sums = Array.from({ length: COMPONENTS }, () => new Float64Array(6));
    const share = (n, c, w) => {
      const [x, y, a, b, d] = moments.subarray(5 * n, 5 * n + 5);
      const sum = sums[c];
      sum[0] += w; sum[1] += w * x; sum[2] += w * y;
      sum[3] += w * (a + x * x); sum[4] += w * (b + x * y); sum[5] += w * (d + y * y);
    };
    weight.forEach((w, n) => {
      if (w <= 1e-14) return;
      const place = (Math.min(Math.max((size[n] - centre) / spread + 4, 0), 8) * (COMPONENTS - 1)) / 8;
      const low = Math.min(Math.floor(place), COMPONENTS - 2);
      share(n, low, w * (low + 1 - place));
      share(n, low + 1, w * (place - low));
    });
    return sums.filter((sum) => sum[0] > 1e-12).map(([w, x, y, a, b, c]) => {
      const [mx, my] = [x / w, y / w];
      return { weight: w, mean: [mx + shift[0], my + shift[1]], covariance: [a / w - mx * mx, b / w - mx * my, c / w - my * my] };
    });
  };

  const mixture = (integrated) => {
    const count = integrated.members.length;
    const factor = Math.sqrt(inflation(count)) - 1;
    const parts = integrated.members.flatMap((member) =>
      memberComponents(member, [0, 1].map((c) => factor * (member.mean[c] - integrated.mean[c]))));
    const total = parts.reduce((sum, part) => sum + part.weight, 0);
    const flat = new Float64Array(6 * parts.length);
    parts.forEach(({ weight, mean, covariance: [a, b, c] }, p) => {
      const determinant = a * c - b * b;
      const height = weight / (total * 2 * Math.PI * Math.sqrt(determinant));
      flat.set([...mean, -0.5 * c / determinant, b / determinant, -0.5 * a / determinant, height], 6 * p);
    });
    return flat;
  };

  const density = (parts, x, y) => {
    let sum = 0;
    for (let p = 0; p < parts.length; p += 6) {
      const u = x - parts[p];
      const v = y - parts[p + 1];
      const exponent = (parts[p + 2] * u + parts[p + 3] * v) * u + parts[p + 4] * v * v;
      if (exponent > -40) sum += parts[p + 5] * Math.exp(exponent);
    }
    return sum;
  };

  const quantile = (probability, mass, low, step) => {
    const left = (k) => (k > 0 ? mass[k - 1] : 0);
    const right = (k) => (k < mass.length ? mass[k] : 0);
    let sum = 0;
    let cell = 0;
    const reached = new Float64Array(mass.length + 1);
    for (let k = 0; k <= mass.length; k++) {
      reached[k] = sum + (right(k) - left(k)) / 24;
      sum += right(k);
    }
    while (cell < mass.length - 1 && reached[cell + 1] <= probability) cell++;
    const share = (probability - reached[cell]) / Math.max(reached[cell + 1] - reached[cell], 1e-300);
    const [first, last] = [cell, cell + 1].map((k) => 0.5 * (left(k) + right(k)));
    const within = (share * (first + last)) / (first + Math.sqrt(Math.max(first * first + share * (last * last - first * first), 0)) + 1e-300);
    return low + step * (cell + within);
  };

  const summary = (mass, low, step) => {
    const [low95, low50, median, high50, high95] = [0.025, 0.25, 0.5, 0.75, 0.975].map((p) => quantile(p, mass, low, step));
    return { median, region50: [low50, high50], region95: [low95, high95] };
  };

  // amplitude, peak day and the levels of the highest-density regions, on cells in amplitude and phase
  const regions = (integrated) => {
    const parts = mixture(integrated);
    const { mean, covariance: [a, b, c] } = integrated;
    const distance = Math.hypot(...mean);
    const reach = REACH * Math.sqrt(0.5 * (a + c) + Math.sqrt(0.25 * (a - c) ** 2 + b * b));
    const half = reach < distance ? Math.asin(reach / distance) : Math.PI;
    const low = Math.max(0, distance - reach);
    const step = (distance + reach - low) / RINGS;
    const turn = (2 * half) / RAYS;
    const from = Math.atan2(mean[1], mean[0]) - half;
    const [ofRing, ofRay] = [new Float64Array(RINGS), new Float64Array(RAYS)];
    const [heights, masses] = [0, 0].map(() => new Float64Array(RINGS * RAYS));
    for (let r = 0; r < RINGS; r++) {
      const size = low + step * (r + 0.5);
      for (let k = 0; k < RAYS; k++) {
        const phase = from + turn * (k + 0.5);
        const height = density(parts, size * Math.cos(phase), size * Math.sin(phase));
        ofRing[r] += height * size;
        ofRay[k] += height * size;
        heights[r * RAYS + k] = height;
        masses[r * RAYS + k] = height * size;
      }
    }
    const total = ofRing.reduce((sum, value) => sum + value, 0);
    const [rings, rays] = [ofRing, ofRay].map((values) => values.map((value) => value / total));
    const amplitude = summary(rings, low, step);
    const days = YEAR_DAYS / (2 * Math.PI);
    const day = summary(rays, days * from, days * turn);
    const years = YEAR_DAYS * Math.floor(day.median / YEAR_DAYS);
    const moved = { median: day.median - years, region50: day.region50.map((d) => d - years), region95: day.region95.map((d) => d - years) };
    const order = Uint32Array.from(heights, (_, k) => k).sort((first, second) => heights[second] - heights[first]);
    const levels = [0.5, 0.95].map((probability) => {
      let sum = 0;
      return heights[order.find((cell) => { sum += masses[cell] / total; return sum >= probability; })];
    });
    return { amplitude, day: moved, contours: levels.map((level) => contour(parts, mean, reach, level)) };
  };

  // where the density falls to a level, along rays from the mean
  const contour = (parts, mean, reach, level) => Array.from({ length: 90 }, (_, k) => {
    const [x, y] = [Math.cos((k * Math.PI) / 45), Math.sin((k * Math.PI) / 45)];
    let [inside, outside] = [0, reach];
    for (let pass = 0; pass < 14; pass++) {
      const middle = 0.5 * (inside + outside);
      if (density(parts, mean[0] + middle * x, mean[1] + middle * y) >= level) inside = middle;
      else outside = middle;
    }
    return [mean[0] + inside * x, mean[1] + inside * y];
  });

  // (U S U + I)^-1 for one of the two columns of A, times U for what comes after, traced back through the elimination
  const tracedBack = (at, which, solved) => {
    const { first, second, third, model, site, group, common } = at;
    const { ends, size } = model;
    const width = size + 1;
    const [start, last] = [ends.common[0], width - ends.common[0]];
    const corner = (last - 3) * last + last - 3;
    const [a, b, c] = [third[corner], third[corner + last], third[corner + last + 1]];
    const determinant = a * c - b * b;
    solved[size - 2] = (which ? -b : c) / determinant;
    solved[size - 1] = (which ? a : -b) / determinant;
    for (let j = size - 3; j >= 0; j--) {
      let sum = 0;
      if (j >= start) {
        for (let i = j + 1; i < size; i++) sum += third[(i - start) * last + j - start] * solved[i] / (i < ends.common[1] ? common : 1);
        solved[j] = (-common * sum) / third[(j - start) * (last + 1)];
      } else {
        const stage = j >= ends.group[0] ? second : first;
        const [own, begun] = j >= ends.group[0] ? [group, ends.group] : [j >= ends.place[0] ? site : 1, null];
        for (let i = j + 1; i < size; i++) {
          // the unit of a column is in its row already where both were scaled together
          const unit = begun ? (i < begun[1] ? group : 1) : (i >= ends.place[0] && i < ends.place[1] ? site : 1);
          sum += (stage[i * width + j] * solved[i]) / unit;
        }
        solved[j] = (-own * sum) / stage[j * (width + 1)];
      }
    }
    return solved;
  };

  // squares of what pairs of rows carry into A: w_a w_b d_a' C d_b, with C the sum of squares of the estimator's columns
  const rowTerms = (pairs, table, variance, both, size, visit) => {
    const turned = new Float64Array(2 * size);
    for (let p = 0; p < pairs.length; p++) {
      const start = [2 * p * (size + 1), (2 * p + 1) * (size + 1)];
      for (let a = 0; a < 2; a++) {
        for (let i = 0; i < size; i++) {
          let sum = 0;
          for (let k = 0; k < size; k++) sum += both[i * size + k] * table[start[a] + k];
          turned[a * size + i] = sum;
        }
      }
      const square = (a, b) => {
        let sum = 0;
        for (let i = 0; i < size; i++) sum += table[start[a] + i] * turned[b * size + i];
        return sum / (variance[2 * p + a] * variance[2 * p + b]);
      };
      const across = square(0, 1);
      visit(pairs[p], [[square(0, 0), across], [across, square(1, 1)]]);
    }
  };

  const contracted = (matrix, squares) =>
    matrix[0][0] * squares[0][0] + 2 * matrix[0][1] * squares[0][1] + matrix[1][1] * squares[1][1];

  /* Shares of the variance by its source, summing to 1. */
  const shares = (integrated) => {
    const { model, axes, members } = integrated;
    const { data, ends, size, shared } = model;
    const sd = data.prior.annual;
    const sum = { record: 0, site_scatter: 0, group: 0, model_local: 0, model_spread: 0, atmosphere: 0, year: 0 };
    const spans = [["atmosphere", 0, 2], ["year", ...ends.year], ["model_spread", ...ends.unmodelled], ["site_scatter", ...ends.place],
      ["group", ...ends.group], ["model_spread", ...ends.common]];
    const [both, solved, unit] = [new Float64Array(size * size), new Float64Array(size), new Float64Array(size).fill(1)];
    for (const { k: member, nodes: { weight } } of members) {
      const table = meanDesign(model, data.admittance[member]);
      const heavy = weight.reduce((total, w) => (w > HEAVY ? total + w : total), 0) * members.length;
      const add = (node, _, at) => {
        unit.fill(at.site, ...ends.place);
        unit.fill(at.group, ...ends.group);
        unit.fill(at.common, ...ends.common);
        const own = (weight[node] / heavy) * sd * sd;
        for (let which = 0; which < 2; which++) {
          tracedBack(at, which, solved);
          // the share of a column is the square of the inverse itself, as (U S U) (U S U + I)^-1 = I - (U S U + I)^-1
          for (const [name, from, to] of spans) for (let c = from; c < to; c++) sum[name] += own * (solved[c] / unit[c]) ** 2;
          for (let a = 0; a < size; a++) for (let b = 0; b < size; b++) both[a * size + b] += own * solved[a] * solved[b];
        }
      };
      const leave = ({ site, local, group, variance, spread, contrasts }) => {
        if (!both[size * size - 1]) return;
        const scatter = (pair, squares) => {
          sum.model_local += contracted(pair.noise, squares);
          pair.rows.forEach((row, a) => { sum.model_local += local * local * row.local * squares[a][a]; });
        };
        rowTerms(model.rows.means, table, variance, both, size, (pair, squares) => {
          const trace = squares[0][0] + squares[1][1];
          sum.record += contracted(pair.record, squares);
          if (!shared.includes(data.place[pair.s])) sum.site_scatter += site * site * trace;
          if (data.alone[pair.s]) sum.group += group * group * trace;
          scatter(pair, squares);
        });
        rowTerms(model.rows.contrasts, contrasts, spread, both, size, scatter);
        both.fill(0);
      };
      walk(model, table, axes, add, (node) => weight[node] > HEAVY, leave);
    }
    sum.fingerprint = integrated.between[0] + integrated.between[2];
    sum.scales = members.reduce((total, { scales }) => total + scales[0] + scales[2], 0) / members.length;
    const total = Object.values(sum).reduce((a, b) => a + b, 0);
    return Object.fromEntries(Object.entries(sum).map(([name, value]) => [name, value / total]));
  };

  return { regions, shares };
})());
