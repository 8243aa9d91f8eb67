// Two small graphs: the spectrum at the cross, and the scattering curve with the angle of the cross.

const SVG = "http://www.w3.org/2000/svg";

function add(parent, name, attributes, text) {
  const made = document.createElementNS(SVG, name);
  for (const [key, value] of Object.entries(attributes)) made.setAttribute(key, value);
  if (text !== undefined) made.textContent = text;
  parent.append(made);
  return made;
}

function write(value, digits) {
  const text = value.toFixed(digits).replace(".", DATA.mark);
  return /[1-9]/.test(text) ? text.replace("-", "−") : text.replace("-", "");
}

function small(value) {
  const [digits, power] = value.toExponential(1).split("e");
  const raised = Array.from(String(Number(power)), (sign) => "⁰¹²³⁴⁵⁶⁷⁸⁹"[sign] ?? "⁻").join("");
  return Number(power) > -3 && Number(power) < 4
    ? String(Number(value.toPrecision(2))).replace(".", DATA.mark)
    : `${digits.replace(".", DATA.mark)} · 10${raised}`;
}

// Returns a function that draws a spectrum, or clears it.
function spectrumGraph(svg, bands) {
  const [left, right, top, foot] = [8, 352, 8, 108];
  const first = Math.min(380, bands.edges[0][0]);
  const last = Math.max(780, bands.edges[bands.edges.length - 1][1]);
  const x = (nm) => left + ((right - left) * (nm - first)) / (last - first);
  bands.edges.forEach(([low, high], place) => {
    const width = Math.max(x(high) - x(low), 3);
    add(svg, "rect", { x: 0.5 * (x(low) + x(high) - width), y: foot + 4, width: width + 0.4, height: 8, fill: bands.colours[place] });
  });
  add(svg, "path", { class: "axis", d: `M${left} ${foot}H${right}` });
  for (let nm = 400; nm < last; nm += 100) {
    if (nm < first) continue;
    add(svg, "path", { class: "grid", d: `M${x(nm)} ${top}V${foot}` });
    add(svg, "text", { x: x(nm), y: foot + 28, "text-anchor": "middle" }, nm === 700 ? `${nm} nm` : `${nm}`);
  }
  const line = add(svg, "path", { class: "plain", d: "" });
  const dots = add(svg, "g", {});
  return (shape) => {
    dots.replaceChildren();
    const y = (share) => foot - (foot - top) * share;
    const middle = ([low, high]) => x(0.5 * (low + high));
    line.setAttribute("d", shape === null || shape.length < 2 ? "" :
      shape.map((share, place) => `${place ? "L" : "M"}${middle(bands.edges[place]).toFixed(1)} ${y(share).toFixed(1)}`).join(""));
    if (shape !== null && shape.length <= 12) {
      shape.forEach((share, place) => add(dots, "circle", { class: "dot", r: 3, cx: middle(bands.edges[place]), cy: y(share) }));
    }
  };
}

// Returns functions that draw the curve of a picture and mark an angle on it.
function curveGraph(svg, curve) {
  const [left, right, top, foot] = [38, 343, 38, 194];
  const low = Math.log10(curve.lowest) - 0.08;
  const high = Math.log10(curve.highest) + 0.05;
  const x = (angle) => left + ((right - left) * angle) / 180;
  const y = (value) => foot - ((foot - top) * (Math.log10(value) - low)) / (high - low);
  const shade = add(svg, "rect", { class: "shade", y: top, height: foot - top });
  for (let angle = 0; angle <= 180; angle += 30) {
    add(svg, "path", { class: "grid", d: `M${x(angle)} ${top}V${foot}` });
    add(svg, "text", { x: x(angle), y: foot + 15, "text-anchor": "middle" }, `${angle}°`);
  }
  const every = Math.max(1, Math.ceil((high - low) / 5));
  for (let power = Math.ceil(low); power <= high; power += 1) {
    add(svg, "path", { class: "grid", d: `M${left} ${y(10 ** power)}H${right}` });
    if (power % every !== 0) continue;
    const raised = Array.from(String(power), (sign) => "⁰¹²³⁴⁵⁶⁷⁸⁹"[sign] ?? "⁻").join("");
    add(svg, "text", { x: left - 5, y: y(10 ** power) + 4, "text-anchor": "end" }, `10${raised}`);
  }
  add(svg, "path", { class: "axis", d: `M${left} ${top}V${foot}H${right}` });
  add(svg, "text", { x: 2, y: 28 }, DATA.words.curve_unit);
  add(svg, "text", { x: 0.5 * (left + right), y: foot + 31, "text-anchor": "middle" }, DATA.words.curve_axis);
  curve.wavelengths.forEach((nm, place) => {
    const at = left + 86 * place;
    add(svg, "path", { class: `light light-${place}`, d: `M${at} 7h22` });
    add(svg, "text", { x: at + 27, y: 11 }, `${nm} nm`);
  });
  const lines = curve.wavelengths.map((_, place) => add(svg, "path", { class: `light light-${place}`, d: "" }));
  const mark = add(svg, "path", { class: "mark", d: "" });
  const value = add(svg, "text", { class: "value", y: top + 12 });
  return {
    draw(picture) {
      picture.curve.unpacked ??= picture.curve.codes.map(codes);
      picture.curve.unpacked.forEach((line, place) => {
        let pen = "M";
        let d = "";
        line.forEach((code, step) => {
          if (code === 0) { pen = "M"; return; }
          d += `${pen}${x(((step + 0.5) * 180) / line.length).toFixed(1)} ${y(decoded(code, curve.lowest, curve.highest)).toFixed(1)}`;
          pen = "L";
        });
        lines[place].setAttribute("d", d);
      });
      shade.setAttribute("x", x(picture.span[0]));
      shade.setAttribute("width", x(picture.span[1]) - x(picture.span[0]));
    },
    mark(angle, digits) {
      mark.setAttribute("d", angle === null ? "" : `M${x(angle).toFixed(2)} ${top}V${foot}`);
      value.textContent = angle === null ? "" : `${write(angle, digits)}°`;
      const after = angle === null || angle < 130;
      value.setAttribute("x", angle === null ? 0 : x(angle) + (after ? 5 : -5));
      value.setAttribute("text-anchor", after ? "start" : "end");
    },
  };
}
