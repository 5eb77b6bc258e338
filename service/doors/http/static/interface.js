// Starts the interactive description on /docs. A file of its own, because the pages of this
// service allow no scripts inside of HTML.
"use strict";
window.addEventListener("load", () => {
  SwaggerUIBundle({
    url: "/openapi.json",
    dom_id: "#interface",
    deepLinking: true,
    // The service that checks descriptions is on another host, to which nothing may go.
    validatorUrl: null,
  });
});
