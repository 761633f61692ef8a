'use strict';
// Draws the charts with the page's own colours, and again when the scheme changes or the page is
// printed. Without script each figure shows its description in words instead.
(function () {
  const names = ['series-1', 'series-2', 'series-3', 'series-4', 'series-5', 'series-6',
    'band', 'limit', 'good', 'bad', 'ink', 'faint', 'rule', 'soft'];

  function palette() {
    const style = getComputedStyle(document.documentElement);
    const colours = {};
    for (const name of names) {
      const own = name === 'faint' ? 'rule-strong' : name;
      colours[name] = style.getPropertyValue('--' + own).trim();
    }
    return colours;
  }

  function coloured(value, colours) {
    if (typeof value === 'string') return Object.hasOwn(colours, value) ? colours[value] : value;
    if (Array.isArray(value)) return value.map(function (v) { return coloured(v, colours); });
    if (value && typeof value === 'object') {
      const out = {};
      for (const key of Object.keys(value)) {
        // Names of data and axes are words, never colours.
        const words = key === 'label' || key === 'labels' || key === 'text';
        out[key] = words && typeof value[key] !== 'object' ? value[key]
          : key === 'labels' && Array.isArray(value[key]) ? value[key] : coloured(value[key], colours);
      }
      return out;
    }
    return value;
  }

  function settle(config, colours) {
    const c = coloured(config, colours);
    c.options = c.options || {};
    c.options.animation = false;
    c.options.responsive = true;
    c.options.maintainAspectRatio = c.options.aspectRatio !== undefined;
    c.options.plugins = c.options.plugins || {};
    // Lines without a name are helpers (bands, limits) and stay out of the key.
    const legend = c.options.plugins.legend = c.options.plugins.legend || {};
    legend.labels = legend.labels || {};
    legend.labels.boxWidth = legend.labels.boxWidth || 18;
    legend.labels.boxHeight = legend.labels.boxHeight || 2;
    legend.labels.filter = function (item) { return Boolean(item.text); };
    for (const axis of Object.values(c.options.scales || {})) {
      axis.grid = Object.assign({ color: colours.rule, borderColor: colours.faint }, axis.grid || {});
    }
    return c;
  }

  const figures = [];
  function draw() {
    const colours = palette();
    Chart.defaults.color = colours.soft;
    Chart.defaults.borderColor = colours.rule;
    Chart.defaults.font.family = getComputedStyle(document.body).fontFamily;
    Chart.defaults.font.size = 12.5;
    for (const figure of figures) {
      const config = settle(figure.config, colours);
      if (figure.chart) {
        figure.chart.destroy();
      }
      figure.chart = new Chart(figure.canvas, config);
    }
  }

  for (const element of document.querySelectorAll('figure.chart')) {
    const config = JSON.parse(element.querySelector('script').textContent);
    if (config.options && config.options.aspectRatio !== undefined) {
      element.querySelector('.plot').classList.add('free');
    }
    element.classList.add('drawn');
    figures.push({ canvas: element.querySelector('canvas'), config: config, chart: null });
  }
  draw();
  matchMedia('(prefers-color-scheme: dark)').addEventListener('change', draw);
  matchMedia('print').addEventListener('change', draw);
})();
