// Package web is the dashboard: pages a person reads in a browser, complete from the server, with scripts
// that only add to them.
//
// A page is Go html/template; what it shows is read through Store, what it changes goes through the JSON
// API that the api package serves on the same origin. Everything a browser needs is embedded: there is no
// build step and no request to anywhere else.
//
//	pages/        one template a page
//	components/   one folder a component: template, style sheet and module beside each other
//	static/       tokens and base styles, shared modules, fonts and vendored parts
//
// Invariants, each held by a test:
//
//   - Colours exist once, as light-dark() pairs in static/tokens.css, and their contrasts are computed from there.
//   - No inline script, no inline style, no innerHTML: the content security policy forbids the first two.
//   - Before is hollow, after is filled, held is dashed, failed is crossed: shape says it, colour repeats it.
//   - A figure that is not defined is an en dash titled "not defined", never a zero.
//   - Static files live under a folder named after a hash of all of them, and are cached for good.
package web
