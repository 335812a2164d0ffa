// A page names its components by data-component; each is a module with a mount(root) of the same name.
// Only what a page uses is fetched.
for (const root of document.querySelectorAll("[data-component]")) {
  const name = root.dataset.component;
  import(`./components/${name}/${name}.js`).then((module) => module.mount(root));
}
