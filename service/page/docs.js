"use strict";
// Reads the OpenAPI document of this very service; nothing is fetched from elsewhere.
SwaggerUIBundle({ url: "/openapi.json", dom_id: "#api", deepLinking: true, validatorUrl: null });
