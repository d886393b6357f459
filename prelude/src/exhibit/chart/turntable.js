// Three components on a table that the reader turns: with the pointer, a finger or the arrow keys.
// Plain script, no libraries; `data` is put in front of it. Points are drawn without perspective,
// so that what is equally far apart looks equally far apart in the plane of the screen.
for (const root of document.querySelectorAll(`[data-turntable="${data.id}"]`)) {
  if (root.dataset.ready) continue;
  root.dataset.ready = "yes";
  const canvas = document.createElement("canvas");
  const stage = root.querySelector("[data-stage]");
  const said = root.querySelector("[data-said]");
  canvas.tabIndex = 0;
  canvas.setAttribute("role", "img");
  canvas.setAttribute("aria-label", data.words + " Arrow keys turn the view, plus and minus change its size, Home brings back the first view.");
  canvas.style.cssText = "width:100%;height:100%;display:block;touch-action:none;cursor:grab;border-radius:4px";
  stage.prepend(canvas);
  stage.hidden = false;
  root.querySelector("[data-controls]").hidden = false;
  root.querySelector("[data-views]").style.display = "none";

  const START = [1, 0, 0, 0, 1, 0, 0, 0, 1];
  const times = (a, b) => a.map((_, k) => {
    const row = 3 * Math.floor(k / 3), column = k % 3;
    return a[row] * b[column] + a[row + 1] * b[column + 3] + a[row + 2] * b[column + 6];
  });
  const aboutUp = (t) => [Math.cos(t), 0, Math.sin(t), 0, 1, 0, -Math.sin(t), 0, Math.cos(t)];
  const aboutSide = (t) => [1, 0, 0, 0, Math.cos(t), -Math.sin(t), 0, Math.sin(t), Math.cos(t)];
  const first = times(aboutSide(0.35), times(aboutUp(-0.5), START));
  let view = first, size = 1, wanted = false, near = -1, places = [];

  const turned = ([x, y, z]) => [
    view[0] * x + view[1] * y + view[2] * z,
    view[3] * x + view[4] * y + view[5] * z,
    view[6] * x + view[7] * y + view[8] * z,
  ];
  const outline = (pen, shape, x, y, r) => {
    pen.beginPath();
    if (!shape.length) pen.arc(x, y, r, 0, 2 * Math.PI);
    shape.forEach(([dx, dy], k) => (k ? pen.lineTo(x + r * dx, y + r * dy) : pen.moveTo(x + r * dx, y + r * dy)));
    pen.closePath();
  };
  const draw = () => {
    wanted = false;
    const box = canvas.getBoundingClientRect();
    const dense = window.devicePixelRatio || 1;
    canvas.width = Math.max(1, Math.round(box.width * dense));
    canvas.height = Math.max(1, Math.round(box.height * dense));
    const pen = canvas.getContext("2d");
    pen.scale(dense, dense);
    pen.font = `11px ${data.fonts}`;
    const scale = (0.44 * Math.min(box.width, box.height) * size) / data.reach;
    const at = (point) => {
      const [x, y, z] = turned(point);
      return [box.width / 2 + x * scale, box.height / 2 - y * scale, z / data.reach];
    };
    for (const { tip, name } of data.axes) {
      const [x, y] = at(tip), [x0, y0] = at(tip.map((v) => -v));
      pen.strokeStyle = data.colors.line;
      pen.lineWidth = 1;
      pen.beginPath();
      pen.moveTo(x0, y0);
      pen.lineTo(x, y);
      pen.stroke();
      pen.fillStyle = data.colors.ink;
      pen.textAlign = x < box.width / 2 ? "right" : "left";
      const room = pen.measureText(name).width;
      const inside = Math.min(Math.max(x + (x < box.width / 2 ? -5 : 5), pen.textAlign === "right" ? room + 2 : 2), pen.textAlign === "right" ? box.width - 2 : box.width - room - 2);
      pen.fillText(name, inside, Math.min(Math.max(y + (y < box.height / 2 ? -4 : 12), 12), box.height - 4));
    }
    places = data.points.map(([x, y, z, group], unit) => {
      const [px, py, depth] = at([x, y, z]);
      return { px, py, depth, group, unit };
    });
    const radius = data.radius;
    for (const { px, py, depth, group } of [...places].sort((a, b) => a.depth - b.depth)) {
      const { color, shape } = data.groups[group];
      const closeness = Math.min(1, Math.max(0, (depth + 1) / 2));
      pen.globalAlpha = 0.3 + 0.65 * closeness;
      pen.fillStyle = color;
      outline(pen, shape, px, py, radius * (0.75 + 0.5 * closeness));
      pen.fill();
    }
    pen.globalAlpha = 1;
    if (near >= 0) {
      const { px, py, group } = places[near];
      pen.strokeStyle = data.colors.ink;
      pen.lineWidth = 1.6;
      outline(pen, data.groups[group].shape, px, py, radius * 1.8);
      pen.stroke();
    }
  };
  const redraw = () => {
    if (!wanted) {
      wanted = true;
      requestAnimationFrame(draw);
    }
  };
  const turn = (right, up) => {
    view = times(aboutSide(-up), times(aboutUp(right), view));
    redraw();
  };
  const resize = (factor) => {
    size = Math.min(20, Math.max(0.4, size * factor));
    redraw();
  };
  const again = () => {
    view = first;
    size = 1;
    redraw();
  };
  const point = (event) => {
    const box = canvas.getBoundingClientRect();
    const [x, y] = [event.clientX - box.left, event.clientY - box.top];
    let best = 144, found = -1;
    for (const place of places) {
      const distance = (place.px - x) ** 2 + (place.py - y) ** 2;
      if (distance < best) [best, found] = [distance, place.unit];
    }
    if (found !== near) {
      near = found;
      said.textContent = found < 0 ? "" : data.names[found] || `unit ${found + 1}`;
      redraw();
    }
  };

  const down = new Map();
  let apart = 0;
  canvas.addEventListener("pointerdown", (event) => {
    down.set(event.pointerId, [event.clientX, event.clientY]);
    canvas.setPointerCapture(event.pointerId);
    canvas.style.cursor = "grabbing";
    apart = 0;
  });
  canvas.addEventListener("pointermove", (event) => {
    const before = down.get(event.pointerId);
    if (!before) return point(event);
    down.set(event.pointerId, [event.clientX, event.clientY]);
    if (down.size === 2) {
      const [[ax, ay], [bx, by]] = [...down.values()];
      const now = Math.hypot(ax - bx, ay - by);
      if (apart) resize(now / apart);
      apart = now;
    } else if (down.size === 1) {
      turn((event.clientX - before[0]) * 0.01, (before[1] - event.clientY) * 0.01);
    }
  });
  for (const end of ["pointerup", "pointercancel"]) {
    canvas.addEventListener(end, (event) => {
      down.delete(event.pointerId);
      apart = 0;
      canvas.style.cursor = "grab";
    });
  }
  const actions = {
    ArrowLeft: () => turn(-0.12, 0), ArrowRight: () => turn(0.12, 0),
    ArrowUp: () => turn(0, 0.12), ArrowDown: () => turn(0, -0.12),
    "+": () => resize(1.15), "-": () => resize(1 / 1.15), Home: again,
  };
  canvas.addEventListener("keydown", (event) => {
    const action = event.ctrlKey || event.metaKey || event.altKey ? null : actions[event.key];
    if (!action) return;
    event.preventDefault();
    event.stopPropagation();
    action();
  });
  for (const button of root.querySelectorAll("[data-does]")) {
    button.addEventListener("click", () => actions[button.dataset.does]());
  }
  new ResizeObserver(redraw).observe(stage);
  redraw();
}
