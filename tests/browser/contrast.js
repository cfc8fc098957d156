// Colours of every text that is shown and of every mark that carries meaning, each with what lies behind it.
const parse = (text) => {
  const n = text.match(/[\d.]+/g).map(Number);
  return text.startsWith("color(") ? [n[0] * 255, n[1] * 255, n[2] * 255, n[3] ?? 1] : [n[0], n[1], n[2], n[3] ?? 1];
};
const over = (top, below) => top.slice(0, 3).map((x, i) => x * top[3] + below[i] * (1 - top[3]));
const behind = (element) => {
  const layers = [];
  for (let e = element; e; e = e.parentElement) {
    const colour = parse(getComputedStyle(e).backgroundColor);
    layers.push(colour);
    if (colour[3] === 1) break;
  }
  return layers.reverse().reduce((below, top) => over(top, below), [255, 255, 255]);
};
const shown = (e) => e.getClientRects().length > 0 && getComputedStyle(e).visibility === "visible";
const found = [];
const walk = document.createTreeWalker(document.body, NodeFilter.SHOW_TEXT);
while (walk.nextNode()) {
  const element = walk.currentNode.parentElement;
  const text = walk.currentNode.textContent.trim();
  if (!text || !shown(element) || element.closest("script, style, option")) continue;
  const style = getComputedStyle(element);
  const ink = parse(element.closest("svg") ? style.fill : style.color);
  const paper = behind(element.closest("svg") ? element.closest("svg").parentElement : element);
  const size = parseFloat(style.fontSize);
  const large = size >= 24 || (size >= 18.66 && Number(style.fontWeight) >= 700);
  found.push([text.slice(0, 40), over(ink, paper), paper, large ? 3 : 4.5]);
}
for (const element of document.querySelectorAll("svg .line, svg .box, svg .window, svg .point, svg .share, svg .saturation, svg .cutoff, svg .axis, input, select")) {
  if (!shown(element)) continue;
  const style = getComputedStyle(element);
  const svg = element.closest("svg");
  const paper = behind(svg ? svg.parentElement : element.parentElement);
  // A filled mark is told from the panel by its fill, an outlined one by its outline.
  const filled = element.matches(".share, .point");
  const ink = parse(svg ? (filled ? style.fill : style.stroke) : style.borderTopColor);
  if (element.type === "radio") continue;
  found.push([element.tagName + "." + element.getAttribute("class"), over(ink, paper), paper, 3]);
}
return found;
