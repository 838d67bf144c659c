// Asks an existing query engine the analyst's questions of the tables that lapwing wrote.
//   node ask.mjs FOLDER_OF_NODE_MODULES PARQUET_TABLES CSV_TABLES
// Prints one JSON object.
import { createRequire } from 'node:module';
const [, , strangers, lake, flat] = process.argv;
const { DuckDBInstance } = createRequire(strangers + '/')('@duckdb/node-api');

const db = await (await DuckDBInstance.create(':memory:')).connect();
const table = (name) => `read_parquet('${lake}/${name}/*/*/*/*.parquet', hive_partitioning = true)`;
const ask = async (sql) => (await db.runAndReadAll(sql)).getRowObjectsJson();

console.log(JSON.stringify({
  partitions: await ask(`select site, skid, cast(date as varchar) as day, count(*) as rows from ${table('measures')} group by all order by all`),
  // Which turn of each day had its discharge valves open latest, against a sealed cylinder?
  worst: await ask(`select cast(date as varchar) as day, throw, cylinder_end as "end", max(angle_deg - expected_deg) as late, arg_max(turn, angle_deg - expected_deg) as turn
    from ${table('events')} where event = 'discharge.opens' and angle_deg is not null and expected_deg is not null group by all order by throw, cylinder_end`),
  // What did the head end's late compression exponent do around each alarm?
  around: await ask(`select a.id, a.key, count(*) as turns, avg(m.value) as mean, min(m.turn) as first, max(m.turn) as last
    from ${table('alarms')} a join ${table('measures')} m on m.turn between a.turn - 20 and a.turn + 20
    where m.subject = 't1.he' and m.name = 'n_comp_late' group by all order by a.id`),
  types: await ask(`select column_name, column_type from (describe select * from ${table('measures')}) order by 1`),
  // The CSV tables are the same ones.
  csv: await ask(`select count(*) as rows, sum(turn) as turns, avg(value) as mean from read_csv('${flat}/measures/*/*/*/*.csv', hive_partitioning = true)`),
  parquet: await ask(`select count(*) as rows, sum(turn) as turns, avg(value) as mean from ${table('measures')}`),
}));
