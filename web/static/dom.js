// el makes an element. Children are nodes or strings; strings become text, never markup.
export function el(tag, attributes = {}, ...children) {
  const node = document.createElement(tag);
  for (const [name, value] of Object.entries(attributes)) {
    if (value === true) node.setAttribute(name, "");
    else if (value !== false && value != null) node.setAttribute(name, value);
  }
  node.append(...children.filter((child) => child != null));
  return node;
}

// parts collects the elements a component's template has named by data-part.
export function parts(root) {
  const found = {};
  for (const node of root.querySelectorAll("[data-part]")) found[node.dataset.part] = node;
  return found;
}

// say puts a sentence where a person and a screen reader find it.
export function say(node, words, wrong = false) {
  if (node.textContent !== words) node.textContent = words; // the same again would be read out again
  node.classList.toggle("wrong", wrong);
}

// colours reads the tokens as the browser resolves them now; a canvas cannot use light-dark() itself.
export function colours(...names) {
  const probe = document.body.appendChild(el("i", { hidden: true }));
  const read = {};
  for (const name of names) {
    probe.style.color = `var(--${name})`;
    read[name] = getComputedStyle(probe).color;
  }
  probe.remove();
  return read;
}

// onTheme calls back when the colours change: by the switch, by the system, or because paper is always light.
export function onTheme(callback) {
  for (const query of ["(prefers-color-scheme: dark)", "print"]) matchMedia(query).addEventListener("change", callback);
  new MutationObserver(callback).observe(document.documentElement, { attributeFilter: ["data-theme"] });
}
