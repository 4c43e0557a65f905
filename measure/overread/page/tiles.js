// The picture of the paper on a canvas: tiles of the level that the zoom needs, coarser ones until
// they are there.

import { tile } from "./api.js";

const TILE_PX = 512, MOST_TILES = 160, AT_ONCE = 4;

export class Tiles {
  constructor(canvas, repaint) {
    this.canvas = canvas;
    this.context = canvas.getContext("2d", { alpha: false });
    this.repaint = repaint;
    this.bitmaps = new Map();
    this.loading = new Set();
    this.failed = new Set();
    this.picture = null;
  }

  // What is shown: `px` pixels of a view that fill `box` of the drawing; `key` tells its turns apart.
  show(picture) {
    const same = picture && this.picture && this.picture.name === picture.name;
    this.picture = picture;
    if (!same) {
      this.bitmaps.clear();
      this.failed.clear();
    }
    this.top = picture?.px ? Math.max(Math.ceil(Math.log2(Math.max(...picture.px) / TILE_PX)), 0) : 0;
    this.wanted = [];
  }

  // Paint the part of the drawing that `box` shows in the middle of the canvas.
  draw([left, top, width, height]) {
    const { canvas, context, picture } = this, ratio = window.devicePixelRatio || 1;
    const [wide, high] = [canvas.clientWidth * ratio, canvas.clientHeight * ratio].map(Math.round);
    if (canvas.width !== wide || canvas.height !== high) Object.assign(canvas, { width: wide, height: high });
    context.fillStyle = "#fff";
    context.fillRect(0, 0, wide, high);
    if (!picture || !wide) return;
    const scale = Math.min(wide / width, high / height);
    const [x0, y0] = [(wide - width * scale) / 2 - left * scale, (high - height * scale) / 2 - top * scale];
    if (!picture.px) {
      this.#rule(x0, y0, scale);
      return;
    }
    const [perX, perY] = [scale * picture.box[2] / picture.px[0], scale * picture.box[3] / picture.px[1]];
    const origin = [x0 + picture.box[0] * scale, y0 + picture.box[1] * scale];
    const need = Math.min(Math.max(Math.floor(-Math.log2(Math.max(perX, perY))), 0), this.top);
    const view = { origin, perX, perY, wide, high };
    const sharp = this.#visible(need, view);
    this.wanted = [...this.#visible(this.top, view), ...sharp].filter(({ id }) => !this.bitmaps.has(id));
    const complete = sharp.every(({ id }) => this.bitmaps.has(id));
    for (let level = complete ? need : this.top; level >= need; level -= 1) {
      for (const { id, place } of level === need ? sharp : this.#visible(level, view)) {
        const bitmap = this.bitmaps.get(id);
        if (bitmap) this.#paint(bitmap, level, place, view);
      }
    }
    this.#load();
  }

  // Paper of its own for a tracing whose page is not there: a line every 5 mm.
  #rule(x0, y0, scale) {
    const { context, picture: { box: [left, top, width, height] } } = this;
    context.strokeStyle = "#d9c9c4";
    context.beginPath();
    for (let x = Math.ceil(left / 5) * 5; x <= left + width; x += 5) {
      context.moveTo(x0 + x * scale, y0 + top * scale);
      context.lineTo(x0 + x * scale, y0 + (top + height) * scale);
    }
    for (let y = Math.ceil(top / 5) * 5; y <= top + height; y += 5) {
      context.moveTo(x0 + left * scale, y0 + y * scale);
      context.lineTo(x0 + (left + width) * scale, y0 + y * scale);
    }
    context.stroke();
  }

  #paint(bitmap, level, [col, row], { origin, perX, perY }) {
    const side = TILE_PX * 2 ** level, grown = 2 ** level;
    const at = (from, per, k) => Math.round(from + k * side * per); // tiles meet without a seam
    const [x, y] = [at(origin[0], perX, col), at(origin[1], perY, row)];
    const full = bitmap.width === TILE_PX, deep = bitmap.height === TILE_PX;
    const width = full ? at(origin[0], perX, col + 1) - x : bitmap.width * grown * perX;
    const height = deep ? at(origin[1], perY, row + 1) - y : bitmap.height * grown * perY;
    this.context.drawImage(bitmap, x, y, width, height);
  }

  #visible(level, { origin, perX, perY, wide, high }) {
    const side = TILE_PX * 2 ** level, { px } = this.picture, tiles = [];
    const [cols, rows] = px.map((n) => Math.ceil(Math.ceil(n / 2 ** level) / TILE_PX));
    const first = (from, per) => Math.max(Math.floor(-from / (side * per)), 0);
    const last = (from, per, room, count) => Math.min(Math.floor((room - from) / (side * per)), count - 1);
    for (let row = first(origin[1], perY); row <= last(origin[1], perY, high, rows); row += 1) {
      for (let col = first(origin[0], perX); col <= last(origin[0], perX, wide, cols); col += 1) {
        tiles.push({ id: `${level}/${col}/${row}`, place: [col, row] });
      }
    }
    return tiles;
  }

  #load() {
    const { picture } = this;
    for (const { id } of this.wanted) {
      if (this.loading.size >= AT_ONCE) return;
      const known = `${picture.name}/${id}`;
      if (this.loading.has(known) || this.failed.has(id)) continue;
      this.loading.add(known);
      this.#fetch(picture, id).finally(() => {
        this.loading.delete(known);
        this.repaint();
      });
    }
  }

  async #fetch(picture, id) {
    try {
      const bitmap = await createImageBitmap(await tile(picture, id));
      if (this.picture?.name !== picture.name) return;
      this.bitmaps.set(id, bitmap);
      if (this.bitmaps.size > MOST_TILES) this.bitmaps.delete(this.bitmaps.keys().next().value);
    } catch {
      this.failed.add(id); // a server that does not answer is told where something is asked of it
    }
  }
}
