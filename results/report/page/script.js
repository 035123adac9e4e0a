// The page says everything without this script. It adds: a theme switch, quick
// tooltips, switches for arms and replicates, a crosshair on the loss curves
// (pointer, or arrow keys once a plot has the focus), and open details in print.
(function () {
  'use strict';
  var root = document.documentElement;
  var data = JSON.parse(document.getElementById('curve-data').textContent);
  var byArm = new Map(data.arms.map(function (a) { return [a.slug, a]; }));
  var all = function (sel, from) { return Array.prototype.slice.call((from || document).querySelectorAll(sel)); };
  var SVG = 'http://www.w3.org/2000/svg';
  var node = function (name, attrs, parent) {
    var e = document.createElementNS(SVG, name);
    Object.keys(attrs).forEach(function (k) { e.setAttribute(k, attrs[k]); });
    parent.appendChild(e);
    return e;
  };
  var show = function (v) { return v === null ? '-' : Number(v).toPrecision(3); };

  all('.switches, .controls').forEach(function (e) { e.hidden = false; });

  // Theme: as the system, light, dark.
  var themes = ['', 'light', 'dark'], button = document.getElementById('theme');
  var setTheme = function (t) {
    if (t) { root.dataset.theme = t; } else { delete root.dataset.theme; }
    button.textContent = 'theme: ' + (t || 'as the system');
    try { localStorage.setItem('ulpine-theme', t); } catch (e) { /* no storage for this file: the choice lasts as long as the page */ }
  };
  var saved = '';
  try { saved = localStorage.getItem('ulpine-theme') || ''; } catch (e) { /* as above */ }
  setTheme(themes.indexOf(saved) < 0 ? '' : saved);
  button.addEventListener('click', function () {
    setTheme(themes[(themes.indexOf(root.dataset.theme || '') + 1) % 3]);
  });

  // Tooltips: the titles of marks, shown at once instead of after a wait.
  var tip = document.getElementById('tip');
  all('figure svg g > title, figure svg text > title').forEach(function (t) {
    t.parentNode.dataset.tip = t.textContent;
    t.remove();
  });
  document.addEventListener('pointermove', function (ev) {
    var at = ev.target.closest ? ev.target.closest('[data-tip]') : null;
    tip.hidden = !at;
    if (!at) { return; }
    tip.textContent = at.dataset.tip;
    var x = Math.min(ev.clientX + 14, innerWidth - tip.offsetWidth - 8);
    var y = ev.clientY + 18;
    if (y + tip.offsetHeight > innerHeight - 4) { y = ev.clientY - tip.offsetHeight - 12; }
    tip.style.left = Math.max(4, x) + 'px';
    tip.style.top = y + 'px';
  });

  // One of several figures: the others stay for paper.
  all('.choice input').forEach(function (radio) {
    var part = document.querySelector('[data-choice="' + radio.value + '"]');
    var choose = function () {
      all('.choice input').forEach(function (r) {
        if (r.name === radio.name) { document.querySelector('[data-choice="' + r.value + '"]').classList.toggle('unchosen', !r.checked); }
      });
    };
    radio.addEventListener('change', choose);
    part.classList.toggle('unchosen', !radio.checked);
  });

  // Arms shown or faded in every figure of curves.
  var switches = all('.arm-switch');
  var applyArms = function () {
    switches.forEach(function (s) {
      all('[data-curves] g[data-arm]').forEach(function (g) {
        if (g.dataset.arm === s.value) { g.classList.toggle('off', !s.checked); }
      });
    });
  };
  switches.forEach(function (s) { s.addEventListener('change', applyArms); });
  var every = function (keep) {
    return function () {
      switches.forEach(function (s, i) { s.checked = keep(i); });
      applyArms();
    };
  };
  if (switches.length) {
    document.getElementById('arms-all').addEventListener('click', every(function () { return true; }));
    document.getElementById('arms-none').addEventListener('click', every(function (i) { return i === 0; }));
  }
  var shown = function (slug) {
    return switches.every(function (s) { return s.value !== slug || s.checked; });
  };

  // Places in a plot.
  var log = Math.log10;
  var placeX = function (p, x) { return p.box[0] + (x - p.epochs[0]) / (p.epochs[1] - p.epochs[0]) * (p.box[2] - p.box[0]); };
  var placeY = function (p, v) {
    var y = v > 0 ? p.box[3] + (log(v) - log(p.loss[0])) / (log(p.loss[1]) - log(p.loss[0])) * (p.box[1] - p.box[3]) : p.box[3];
    return Math.max(p.box[1], Math.min(p.box[3], y));
  };

  // Single replicates, drawn on demand from the page's own numbers.
  var box = document.getElementById('replicates');
  var drawSingles = function () {
    all('.singles').forEach(function (g) { g.remove(); });
    if (!box.checked) { return; }
    all('[data-curves="loss-by-arm"] svg').forEach(function (svg) {
      JSON.parse(svg.dataset.panels).forEach(function (p) {
        var slug = p.arms[p.arms.length - 1], arm = byArm.get(slug);
        var g = node('g', { 'class': 'singles', 'data-arm': slug }, svg);
        arm.runs.forEach(function (run) {
          var d = '', pen = 'M';
          run.loss.forEach(function (v, i) {
            if (v === null) { pen = 'M'; return; }
            d += pen + placeX(p, data.epochs[i]).toFixed(1) + ' ' + placeY(p, v).toFixed(1);
            pen = 'L';
          });
          var line = node('path', { d: d, 'class': 'f-none l-arm', 'stroke-width': 0.7, opacity: 0.75 }, g);
          line.dataset.tip = arm.name + ', replicate ' + run.replicate;
        });
      });
    });
    applyArms();
  };
  if (box) { box.addEventListener('change', drawSingles); }

  // Crosshair.
  var mark = function (svg, out, p, i) {
    var old = svg.querySelector('.cross');
    if (old) { old.remove(); }
    if (i < 0) { return; }
    var g = node('g', { 'class': 'cross', 'pointer-events': 'none' }, svg);
    var x = placeX(p, data.epochs[i]);
    node('path', { d: 'M' + x + ' ' + p.box[1] + 'V' + p.box[3], 'class': 'f-none l-ink', 'stroke-width': 0.8 }, g);
    out.textContent = '';
    var put = function (tag, words) {
      var e = document.createElement(tag);
      e.textContent = words;
      out.appendChild(e);
      out.appendChild(document.createTextNode(' '));
    };
    put('span', 'epoch ' + data.epochs[i].toFixed(1));
    p.arms.filter(shown).forEach(function (slug) {
      var a = byArm.get(slug);
      if (a.mid[i] !== null) { node('circle', { cx: x, cy: placeY(p, a.mid[i]), r: 3, 'class': 'f-paper l-ink' }, g); }
      put('span', a.name + ' ' + show(a.mid[i]) + ' (' + show(a.low[i]) + ' to ' + show(a.high[i]) + ')');
    });
  };
  var nearest = function (p, x) {
    var e = p.epochs[0] + (x - p.box[0]) / (p.box[2] - p.box[0]) * (p.epochs[1] - p.epochs[0]);
    var best = -1;
    data.epochs.forEach(function (v, i) { if (best < 0 || Math.abs(v - e) < Math.abs(data.epochs[best] - e)) { best = i; } });
    return best;
  };
  all('svg[data-panels]').forEach(function (svg) {
    var panels = JSON.parse(svg.dataset.panels), out = svg.closest('figure').querySelector('.readout');
    var now = { panel: 0, at: -1 };
    svg.setAttribute('tabindex', '0');
    svg.addEventListener('pointermove', function (ev) {
      var q = new DOMPoint(ev.clientX, ev.clientY).matrixTransform(svg.getScreenCTM().inverse());
      var k = panels.findIndex(function (p) {
        return q.x >= p.box[0] - 4 && q.x <= p.box[2] + 4 && q.y >= p.box[1] - 4 && q.y <= p.box[3] + 4;
      });
      if (k < 0) { return; }
      now = { panel: k, at: nearest(panels[k], q.x) };
      mark(svg, out, panels[k], now.at);
    });
    svg.addEventListener('pointerleave', function () { mark(svg, out, panels[now.panel], -1); });
    svg.addEventListener('blur', function () { mark(svg, out, panels[now.panel], -1); });
    svg.addEventListener('keydown', function (ev) {
      var step = { ArrowLeft: -1, ArrowRight: 1 }[ev.key], jump = { ArrowUp: -1, ArrowDown: 1 }[ev.key];
      if (step === undefined && jump === undefined) { return; }
      ev.preventDefault();
      if (jump) { now.panel = (now.panel + jump + panels.length) % panels.length; }
      if (step) { now.at = Math.max(0, Math.min(data.epochs.length - 1, now.at + step)); }
      mark(svg, out, panels[now.panel], Math.max(0, now.at));
    });
  });

  // Paper shows what details hide, but for the long ones.
  var closed = [];
  addEventListener('beforeprint', function () {
    closed = all('details:not([open]):not(.long)');
    closed.forEach(function (d) { d.open = true; });
  });
  addEventListener('afterprint', function () { closed.forEach(function (d) { d.open = false; }); });
}());
