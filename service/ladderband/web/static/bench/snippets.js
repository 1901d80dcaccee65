// The request as text that runs elsewhere.

import { apiKey, base } from "./api.js";

const KEY_NOTE = "LADDERBAND_KEY"; // the key itself never gets into a copied text

export function curl(path, body) {
  const key = apiKey() ? ` -H "Authorization: Bearer $${KEY_NOTE}"` : "";
  // a here-document needs no quoting and may be of any length
  return `curl -s '${new URL(path, base)}' -H 'Content-Type: application/json'${key} --data-binary @- <<'END'
${JSON.stringify(body, null, 1)}
END
`;
}

export function python(path, body) {
  const key = apiKey() ? `\n        "Authorization": "Bearer " + os.environ["${KEY_NOTE}"],` : "";
  return `import json
${apiKey() ? "import os\n" : ""}import urllib.request

body = ${literal(body)}
request = urllib.request.Request(
    ${JSON.stringify(String(new URL(path, base)))},
    json.dumps(body).encode(),
    {
        "Content-Type": "application/json",${key}
    },
)
with urllib.request.urlopen(request) as response:
    answer = json.load(response)
print(json.dumps(answer["accuracy"]))
`;
}

// JSON is Python but for three words, which a body of numbers and texts does not hold otherwise.
function literal(body) {
  const words = { true: "True", false: "False", null: "None" };
  return JSON.stringify(body, null, 4).replace(/"(?:[^"\\]|\\.)*"|\b(true|false|null)\b/g, (text, word) => (word ? words[word] : text));
}
