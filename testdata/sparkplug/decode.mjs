// Listens to one edge node with a decoder of others (npm sparkplug-payload) and keeps its books as a host would.
//   node decode.mjs FOLDER_OF_NODE_MODULES < lines of mosquitto_sub -F '%t %q %r %x'
// Prints one JSON object: what it objects to, births, deaths, alarms as they came, and the newest values.
import { createRequire } from 'node:module';
import { readFileSync } from 'node:fs';
const require = createRequire(process.argv[2] + '/');
const sparkplug = require('sparkplug-payload').get('spBv1.0');
const { Payload } = require('sparkplug-payload/lib/sparkplugPayloadProto.js').org.eclipse.tahu.protobuf;
const number = (x) => (x === null || x === undefined ? x : Number(x)); // of the library's 64-bit numbers

const out = { objections: [], births: [], deaths: [], rebirths: 0, deviceDeaths: [], messages: 0, alarms: [], values: {} };
const object = (what) => { if (out.objections.length < 50) out.objections.push(what); };
let seq = null, bdSeq = null, online = false, names = new Map(), devices = new Set();

// decode has the library decode a payload; data comes without types, which the birth has told.
function decode(bytes, birth, where) {
  const raw = Payload.decode(bytes);
  if (!birth) {
    for (const m of raw.metrics) {
      if (Object.hasOwn(m, 'name') || Object.hasOwn(m, 'datatype')) object(`${where}: name or type in a data message`);
      const known = names.get(number(m.alias));
      if (!known) { object(`${where}: alias ${m.alias} was not born`); continue; }
      m.datatype = known.type;
      m.name = known.name;
    }
  }
  return { raw, ...sparkplug.decodePayload(Payload.encode(raw).finish()) };
}

for (const line of readFileSync(0, 'utf8').split('\n')) {
  const [topic, qos, retain, hex] = line.split(' ');
  const [ns, , kind, , device] = (topic ?? '').split('/');
  if (ns !== 'spBv1.0' || !/^[ND](BIRTH|DATA|DEATH)$/.test(kind ?? '')) continue;
  out.messages++;
  const where = `message ${out.messages} on ${topic}`;
  const bytes = Buffer.from(hex ?? '', 'hex');
  if (retain !== '0') object(`${where}: retained`);
  if (kind === 'NDEATH') {
    const p = sparkplug.decodePayload(bytes);
    if (p.seq !== undefined || p.metrics?.length !== 1 || p.metrics[0].name !== 'bdSeq') object(`${where}: ${JSON.stringify(p)}`);
    out.deaths.push({ bdSeq: number(p.metrics?.[0]?.value), matches: number(p.metrics?.[0]?.value) === bdSeq, after: out.births.length });
    online = false;
    continue;
  }
  if (qos !== '0') object(`${where}: QoS ${qos}`);
  const birth = kind.endsWith('BIRTH');
  if (kind === 'NBIRTH') { names = new Map(); devices = new Set(); }
  const p = decode(bytes, birth, where);
  const s = number(p.seq);
  if (kind === 'NBIRTH' ? s !== 0 : s !== (seq + 1) % 256) object(`${where}: seq ${s} after ${seq}`);
  if (kind !== 'NBIRTH' && !online) object(`${where}: before a birth`);
  if (kind.startsWith('D') && kind !== 'DBIRTH' && !devices.has(device)) object(`${where}: the device was not born`);
  seq = s;
  if (!(number(p.timestamp) > Date.UTC(2020))) object(`${where}: timestamp ${p.timestamp}`);
  if (kind === 'DDEATH') { devices.delete(device); out.deviceDeaths.push(device); continue; }
  if (kind === 'DBIRTH') devices.add(device);
  if (kind === 'NBIRTH') {
    const by = Object.fromEntries(p.metrics.map((m) => [m.name, m]));
    const is = number(by.bdSeq?.value);
    if (by.bdSeq?.type !== 'Int64' || !(is >= 0 && is <= 255)) object(`${where}: bdSeq ${JSON.stringify(by.bdSeq)}`);
    const r = by['Node Control/Rebirth'];
    if (r?.type !== 'Boolean' || r.value !== false || r.alias !== undefined) object(`${where}: rebirth ${JSON.stringify(r)}`);
    if (online && is === bdSeq) out.rebirths++;
    online = true;
    bdSeq = is;
    out.births.push(is);
    out.values = {};
  }
  if (birth) out.values[device ?? ''] = {};
  p.metrics?.forEach((m, i) => {
    const alias = number(m.alias);
    if (birth) {
      if (!m.name || !m.type) object(`${where}: ${JSON.stringify(m)}`);
      if (m.name !== 'Node Control/Rebirth') {
        const was = names.get(alias);
        if (!alias || (was && was.name !== m.name)) object(`${where}: alias ${alias} of ${m.name} and ${was?.name}`);
        names.set(alias, { name: m.name, type: p.raw.metrics[i].datatype });
      }
    }
    if (!(number(m.timestamp) > Date.UTC(2020))) object(`${where}: ${m.name} has no time`);
    if (p.raw.metrics[i].isNull !== true && (m.value === null || m.value === undefined)) object(`${where}: ${m.name} is neither null nor a value`);
    const value = typeof m.value === 'object' ? number(m.value) : m.value;
    const id = number(m.properties?.id?.value);
    if (id) {
      out.alarms.push({ id, name: m.name, value, state: m.properties.state?.value, sentence: m.properties.sentence?.value, at: number(m.timestamp), historical: m.isHistorical === true, birth });
    }
    if (!m.isHistorical && out.values[device ?? '']) out.values[device ?? ''][m.name] = value;
  });
}
process.stdout.write(JSON.stringify(out));
