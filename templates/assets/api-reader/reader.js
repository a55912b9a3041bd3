// Opens the description of this server's API. Nothing is asked of any other server.
"use strict";
(() => {
  const dark = window.matchMedia("(prefers-color-scheme: dark)");
  const follow = () => document.documentElement.classList.toggle("dark-mode", dark.matches);
  dark.addEventListener("change", follow);
  follow();
  window.SwaggerUIBundle({
    url: "/api/openapi.json",
    dom_id: "#api-reader",
    presets: [window.SwaggerUIBundle.presets.apis],
    layout: "BaseLayout",
    deepLinking: true,
    docExpansion: "list",
    defaultModelsExpandDepth: 0,
    validatorUrl: null,
  });
})();
