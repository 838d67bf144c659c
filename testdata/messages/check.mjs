// Holds every JSON message to its published schema with a validator of others (npm ajv, draft 2020-12), and to what no
// schema says: the unit in every number's name.
//   node check.mjs FOLDER_OF_NODE_MODULES FOLDER_OF_SCHEMAS ROOT < lines of mosquitto_sub -F '%t %q %r %p'
// Prints one JSON object.
import { createRequire } from 'node:module';
import { readFileSync, readdirSync } from 'node:fs';
const [, , strangers, schemas, root] = process.argv;
const require = createRequire(strangers + '/');
const ajv = new (require('ajv/dist/2020').default)({ strict: true, allErrors: true });
require('ajv-formats').default(ajv);
const check = {};
for (const f of readdirSync(schemas)) check[f.replace('.json', '')] = ajv.compile(JSON.parse(readFileSync(`${schemas}/${f}`)));

const unit = /(^|_)(s|ms|h|rpm|hz|bar|bar_abs|bar_deg|percent|kn|kw|kj|j|kg|kg_h|nm3_h|kwh_1000nm3|g|mm|mm2|deg|c|k|db|v|bytes|bytes_per_s|ln|samples|turns|blocks)$/;
// Numbers without a unit: counts, numbers that name something, ratios and exponents.
const bare = new Set(`v id turn since_turn turns_not_valid learning_turns_left samples_lost blocks_dropped blocks_dropped_before_line clips connections sent
  replaced births absent first_up_order extra_hits extra_hits_45 flow_balance leak_residual leak_shape crest n_comp_early n_comp_early_se n_comp_late n_comp_late_se
  n_exp_early n_exp_early_se n_exp_late n_exp_late_se ratio_line ratio_plateau spreads weight`.split(/\s+/));
// Numbers of an amount, a piece of evidence or a trend: their unit stands in the name of what they are numbers of.
const borrowed = new Set(['value', 'low', 'high', 'expected', 'from', 'to', 'per_hour', 'per_hour_low', 'per_hour_high']);
const named = (name) => unit.test(name) || bare.has(name);
const counts = new Set(['absent_why', 'turns_not_valid_by_reason']); // reason to how often
const out = { objections: [], messages: {}, unnamed: [] };
const object = (what) => { if (out.objections.length < 50) out.objections.push(what); };

function walk(v, key, at, owner) {
  if (typeof v === 'number') {
    const name = borrowed.has(key) ? String(owner?.name ?? owner?.of ?? owner?.feature ?? key).split('/').pop() : key;
    if (!named(name) && !out.unnamed.includes(name)) out.unnamed.push(name);
  }
  if (typeof v === 'string' && /^\d{4}-\d\d-\d\dT/.test(v) && !/^\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d(\.\d+)?Z$/.test(v)) object(`${at}: ${v} is not UTC`);
  if (v === null) object(`${at}: null`);
  if (v && typeof v === 'object' && !counts.has(key)) for (const [k, x] of Object.entries(v)) walk(x, Array.isArray(v) ? key : k, `${at}.${k}`, Array.isArray(v) ? owner : v);
}

for (const line of readFileSync(0, 'utf8').split('\n')) {
  const m = /^(\S+) (\d) (\d) (.*)$/s.exec(line);
  if (!m) continue;
  const [, topic, qos, retain, payload] = m;
  if (!topic.startsWith(root + '/')) { object(`${topic} is outside ${root}`); continue; }
  const part = topic.slice(root.length + 1).split('/')[1];
  out.messages[part] = (out.messages[part] ?? 0) + 1;
  if (qos !== '1') object(`${topic}: QoS ${qos}`);
  if (payload === '') { if (part !== 'standing') object(`${topic}: empty`); continue; }
  let v;
  try { v = JSON.parse(payload); } catch (e) { object(`${topic}: ${e}`); continue; }
  if (!check[part]) { object(`${topic}: no schema`); continue; }
  if (!check[part](v)) object(`${topic}: ${ajv.errorsText(check[part].errors)}: ${payload.slice(0, 200)}`);
  if ((part === 'alarm' || part === 'standing') && !(v.sentence.length > 10 && /isolate, depressurise/.test(v.caution))) object(`${topic}: no sentence or caution`);
  walk(v, '', topic, v);
}
process.stdout.write(JSON.stringify(out));
