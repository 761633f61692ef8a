// Makes elements: make('button', {class: 'main', onclick: f}, 'text', child, ...).
export function make(tag, attributes = {}, ...children) {
  const element = document.createElement(tag);
  for (const [name, value] of Object.entries(attributes)) {
    if (value === undefined || value === null || value === false) continue;
    if (name.startsWith('on')) element.addEventListener(name.slice(2), value);
    else if (name in element && (name === 'value' || name === 'checked' || name === 'disabled')) element[name] = value;
    else element.setAttribute(name, value === true ? '' : value);
  }
  element.append(...children.flat().filter((child) => child !== null && child !== undefined && child !== false));
  return element;
}

export function field(label, input) {
  return make('label', { class: 'field' }, label, input);
}

export function facts(pairs) {
  return make('dl', {}, ...pairs.filter((pair) => pair[1] !== undefined && pair[1] !== null)
    .map(([name, value]) => [make('dt', {}, name), make('dd', {}, value)]));
}

// Rows: arrays of text or elements; `numeric` holds the columns that are numbers.
export function sheet(head, rows, numeric = [], rowClass = () => '') {
  const cell = (tag, text, i) => make(tag, { class: numeric.includes(i) ? 'n' : undefined }, text);
  return make('div', { class: 'list', tabindex: '0', role: 'region', 'aria-label': head.join(', ') },
    make('table', {},
      make('thead', {}, make('tr', {}, ...head.map((text, i) => cell('th', text, i)))),
      make('tbody', {}, ...rows.map((row, r) =>
        make('tr', { class: rowClass(r) || undefined }, ...row.map((text, i) => cell('td', text, i)))))));
}

export const metres = (value, digits = 2) => Number.isFinite(value) ? `${value.toFixed(digits)} m` : '–';
export const degrees = (value, digits = 1) => Number.isFinite(value) ? `${value.toFixed(digits)}°` : '–';
export const percent = (value, digits = 1) => Number.isFinite(value) ? `${(100 * value).toFixed(digits)} %` : '–';
