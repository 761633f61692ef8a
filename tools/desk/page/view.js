// A canvas that shows something in its own coordinates (pixels of a frame, metres of floor), with
// pan, zoom, and a pointer that mouse, finger and keyboard all move.

export class View {
  // options: bounds() -> {x0, y0, x1, y1} to fit, draw(context, view), step (keyboard, own units),
  // onPoint(x, y), onAct(x, y, event), onDragStart(x, y) -> handle or null, onDrag(handle, x, y),
  // onDrop(handle, x, y)
  constructor(canvas, options) {
    this.canvas = canvas;
    this.options = options;
    this.scale = 1;
    this.x0 = 0;
    this.y0 = 0;
    this.flip = options.flip ? -1 : 1;
    this.fitted = false;
    this.pointer = null;
    this.fingers = new Map();
    this.drag = null;
    this.pending = false;
    this.listen();
    new ResizeObserver(() => { this.fitted = false; this.redraw(); }).observe(canvas);
  }

  fit() {
    const bounds = this.options.bounds();
    if (!bounds || !this.canvas.clientWidth) return;
    const width = this.canvas.clientWidth;
    const height = this.canvas.clientHeight;
    this.scale = Math.min(width / (bounds.x1 - bounds.x0), height / (bounds.y1 - bounds.y0));
    this.x0 = (bounds.x0 + bounds.x1) / 2 - width / (2 * this.scale);
    const middle = (bounds.y0 + bounds.y1) / 2;
    this.y0 = middle - this.flip * height / (2 * this.scale);
    this.fitted = true;
  }

  toScreen(x, y) {
    return [(x - this.x0) * this.scale, this.flip * (y - this.y0) * this.scale];
  }

  toOwn(sx, sy) {
    return [this.x0 + sx / this.scale, this.y0 + this.flip * sy / this.scale];
  }

  redraw() {
    if (this.pending) return;
    this.pending = true;
    requestAnimationFrame(() => {
      this.pending = false;
      this.paint();
    });
  }

  paint() {
    const ratio = devicePixelRatio || 1;
    const width = Math.round(this.canvas.clientWidth * ratio);
    const height = Math.round(this.canvas.clientHeight * ratio);
    if (!width || !height) return;
    if (this.canvas.width !== width || this.canvas.height !== height) {
      this.canvas.width = width;
      this.canvas.height = height;
    }
    if (!this.fitted) this.fit();
    const context = this.canvas.getContext('2d');
    context.setTransform(ratio, 0, 0, ratio, 0, 0);
    context.clearRect(0, 0, width, height);
    this.options.draw(context, this);
  }

  zoom(factor, sx, sy) {
    const [x, y] = this.toOwn(sx, sy);
    this.scale *= factor;
    this.x0 = x - sx / this.scale;
    this.y0 = y - this.flip * sy / this.scale;
    this.redraw();
  }

  at(event) {
    const box = this.canvas.getBoundingClientRect();
    return [event.clientX - box.left, event.clientY - box.top];
  }

  listen() {
    const canvas = this.canvas;
    const options = this.options;
    canvas.addEventListener('wheel', (event) => {
      event.preventDefault();
      this.zoom(Math.exp(-event.deltaY * 0.0016), ...this.at(event));
    }, { passive: false });
    canvas.addEventListener('pointerdown', (event) => {
      canvas.setPointerCapture(event.pointerId);
      this.fingers.set(event.pointerId, this.at(event));
      if (this.fingers.size === 1) {
        const own = this.toOwn(...this.at(event));
        this.drag = {
          handle: options.onDragStart ? options.onDragStart(...own, event) : null,
          from: this.at(event), last: this.at(event), moved: false,
          pan: event.button === 1 || event.shiftKey,
        };
      }
    });
    canvas.addEventListener('pointermove', (event) => {
      const now = this.at(event);
      if (this.fingers.size === 2 && this.fingers.has(event.pointerId)) {
        const other = [...this.fingers].find(([id]) => id !== event.pointerId)[1];
        const before = this.fingers.get(event.pointerId);
        const was = Math.hypot(before[0] - other[0], before[1] - other[1]);
        const is = Math.hypot(now[0] - other[0], now[1] - other[1]);
        if (was > 8 && is > 8) this.zoom(is / was, (now[0] + other[0]) / 2, (now[1] + other[1]) / 2);
        this.fingers.set(event.pointerId, now);
        if (this.drag) this.drag.moved = true;
        return;
      }
      const drag = this.drag;
      if (drag) {
        if (Math.hypot(now[0] - drag.from[0], now[1] - drag.from[1]) > 3) drag.moved = true;
        if (drag.moved && drag.handle) {
          options.onDrag(drag.handle, ...this.toOwn(...now));
        } else if (drag.moved && (drag.pan || !drag.handle)) {
          this.x0 -= (now[0] - drag.last[0]) / this.scale;
          this.y0 -= this.flip * (now[1] - drag.last[1]) / this.scale;
          this.redraw();
        }
        drag.last = now;
        if (this.fingers.has(event.pointerId)) this.fingers.set(event.pointerId, now);
      }
      this.point(...this.toOwn(...now));
    });
    const lift = (event) => {
      this.fingers.delete(event.pointerId);
      const drag = this.drag;
      if (!drag || this.fingers.size) return;
      this.drag = null;
      const own = this.toOwn(...this.at(event));
      if (drag.moved && drag.handle) options.onDrop(drag.handle, ...own);
      else if (!drag.moved && event.type === 'pointerup') {
        this.point(...own);
        if (options.onAct) options.onAct(...own, event);
      }
    };
    canvas.addEventListener('pointerup', lift);
    canvas.addEventListener('pointercancel', lift);
    canvas.addEventListener('keydown', (event) => {
      const size = options.step * (event.shiftKey ? 10 : 1);
      const moves = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, -1], ArrowDown: [0, 1] };
      const middle = [canvas.clientWidth / 2, canvas.clientHeight / 2];
      if (moves[event.key]) {
        const now = this.pointer || this.toOwn(...middle);
        const [dx, dy] = moves[event.key];
        this.point(now[0] + dx * size, now[1] + dy * size * this.flip);
      } else if (event.key === 'Enter' && this.pointer && options.onAct) {
        options.onAct(...this.pointer, event);
      } else if (event.key === '+' || event.key === '=') {
        this.zoom(1.25, ...(this.pointer ? this.toScreen(...this.pointer) : middle));
      } else if (event.key === '-') {
        this.zoom(0.8, ...(this.pointer ? this.toScreen(...this.pointer) : middle));
      } else if (event.key === '0') {
        this.fitted = false;
        this.redraw();
      } else {
        return;
      }
      event.preventDefault();
    });
  }

  point(x, y) {
    this.pointer = [x, y];
    if (this.options.onPoint) this.options.onPoint(x, y);
  }
}

// The page's colours, by name, as they are now (they follow light and dark).
export function ink(name) {
  return getComputedStyle(document.documentElement).getPropertyValue('--' + name).trim();
}

export function cross(context, x, y, colour, size = 7) {
  context.save();
  for (const [stroke, width] of [[ink('sheet'), 3.5], [colour, 1.5]]) {
    context.strokeStyle = stroke;
    context.lineWidth = width;
    context.beginPath();
    context.moveTo(x - size, y);
    context.lineTo(x + size, y);
    context.moveTo(x, y - size);
    context.lineTo(x, y + size);
    context.stroke();
  }
  context.restore();
}
