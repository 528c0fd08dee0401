"""Questions to a page in a real browser: what it shows, and what a reader could not read, reach or trust."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from selenium.webdriver import Chrome

MOVE = """
const item = [...document.querySelectorAll('#sliders li')]
  .find((node) => node.querySelector('label').textContent === arguments[0]);
const slider = item.querySelector('input[type=range]');
slider.value = arguments[1]; slider.dispatchEvent(new Event('input'));
const done = arguments[arguments.length - 1];
requestAnimationFrame(() => requestAnimationFrame(() => done(true)));
"""
SHOWN = """
const row = document.querySelector(`#interval-rows tr[data-c="${arguments[0]}"]`);
return [...row.querySelectorAll('data')].slice(0, 5).map((node) => Number(node.value));
"""


def move(browser: Chrome, source: str, factor: float) -> None:
    browser.execute_async_script(MOVE, source, str(factor))


OVERFLOW = """
const width = document.documentElement.clientWidth;
const out = [...document.querySelectorAll('body *')].filter((node) => {
  const box = node.getBoundingClientRect();
  return box.width > 0 && box.right > width + 1 && !node.closest('.scroll, .skip, .hide');
});
return [document.documentElement.scrollWidth - width, ...out.map((node) => node.outerHTML.slice(0, 80))];
"""
OVERLAP = """
const found = [];
for (const figure of document.querySelectorAll('svg[role=img]')) {
  const frame = figure.getBoundingClientRect();
  const texts = [...figure.querySelectorAll('text')];
  const boxes = texts.map((node) => [node.textContent, node.getBoundingClientRect()]);
  boxes.forEach(([a, p], i) => {
    if (p.left < frame.left - 1 || p.right > frame.right + 1) found.push(`${a} leaves its figure`);
    for (const [b, q] of boxes.slice(i + 1))
      if (Math.min(p.right, q.right) - Math.max(p.left, q.left) > 1
          && Math.min(p.bottom, q.bottom) - Math.max(p.top, q.top) > 3) found.push(`${a} over ${b}`);
  });
}
return found;
"""
CONTRAST = """
const canvas = document.createElement('canvas').getContext('2d', { willReadFrequently: true });
function rgba(colour) {
  canvas.clearRect(0, 0, 1, 1); canvas.fillStyle = colour; canvas.fillRect(0, 0, 1, 1);
  return canvas.getImageData(0, 0, 1, 1).data;
}
function light([r, g, b]) {
  const part = (v) => { v /= 255; return v <= 0.04045 ? v / 12.92 : ((v + 0.055) / 1.055) ** 2.4; };
  return 0.2126 * part(r) + 0.7152 * part(g) + 0.0722 * part(b);
}
function ground(node) {
  for (let at = node; at; at = at.parentElement) {
    const back = rgba(getComputedStyle(at).backgroundColor);
    if (back[3] === 255) return back;
  }
  return [255, 255, 255];
}
const poor = new Set();
const walk = document.createTreeWalker(document.body, NodeFilter.SHOW_TEXT);
while (walk.nextNode()) {
  const node = walk.currentNode.parentElement, look = getComputedStyle(node);
  if (!walk.currentNode.textContent.trim() || node.closest('script, style, noscript, option')) continue;
  if (!node.getClientRects().length || node.closest(':disabled, .hide, .skip')) continue;
  const ink = light(rgba(node.ownerSVGElement ? look.fill : look.color)), paper = light(ground(node));
  const ratio = (Math.max(ink, paper) + 0.05) / (Math.min(ink, paper) + 0.05);
  if (ratio < 4.5) poor.add(`${walk.currentNode.textContent.trim().slice(0, 30)}: ${ratio.toFixed(2)}`);
}
return [...poor];
"""
UNNAMED = """
const used = 'input, select, textarea, button, a[href], summary, [role=img], [role=region]';
return [...document.querySelectorAll(used)]
  .filter((node) => {
    const ids = (node.getAttribute('aria-labelledby') ?? '').split(' ');
    const by = ids.map((id) => document.getElementById(id)?.textContent);
    const label = node.labels && [...node.labels].map((one) => one.textContent).join('');
    const own = node.matches('button, a, summary') ? node.textContent : '';
    const title = node.querySelector?.(':scope > title')?.textContent;
    return !(node.getAttribute('aria-label') || by.join('').trim() || label?.trim() || own.trim() || title);
  }).map((node) => node.outerHTML.slice(0, 80));
"""


def complaints(browser: Chrome) -> list[str]:
    return [entry["message"] for entry in browser.get_log("browser") if entry["level"] != "INFO"]
