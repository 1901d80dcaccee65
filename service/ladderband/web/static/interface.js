SwaggerUIBundle({
  url: "../openapi.json",
  dom_id: "#page",
  validatorUrl: null,
  deepLinking: true,
  tryItOutEnabled: true,
  defaultModelsExpandDepth: 0,
});
