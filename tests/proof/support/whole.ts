import { expect } from 'vitest';
import type { FreshDatabase } from '../../support/database';
import { sealAll } from '../../support/seal';
import type { BookingTally } from './bookers';
import type { Tally } from './savers';

/** The number of rows a check found wrong, with the first few for the message. */
async function none(db: FreshDatabase, what: string, query: string): Promise<void> {
	const [rows = []] = await db.sql(query);
	expect(rows.slice(0, 3), `${what}: ${rows.length}`).toEqual([]);
}

/** Seals all there is, and lets the trail prove itself. */
export async function expectWholeTrail(db: FreshDatabase): Promise<number> {
	await sealAll(db);
	const [breaks, state] = await db.sql(
		'select * from audit.verify()',
		'select events::int, sealed::int from audit.state()'
	);
	expect(breaks).toEqual([]);
	expect(state?.[0].sealed).toBe(state?.[0].events);
	return state?.[0].events as number;
}

/**
 * Every acknowledged save stands in the trail as the change it was, every value is what its trail says, nothing is half
 * there, and what is derived agrees with what it is derived from.
 */
export async function expectWholeSaves(db: FreshDatabase, { kept }: Tally): Promise<void> {
	// Versions and events are counted by different triggers: version n is the n-th event of the row.
	const [lost = []] = await db.sql(`
		with told as (
			select * from jsonb_to_recordset('${JSON.stringify(kept)}') as t(id text, version int, "column" text, value jsonb)
		), trail as (
			select record_id, after, row_number() over (partition by record_id order by id) as version
			from audit.event where record = 'measurement'
		)
		select t.* from told t left join trail e on e.record_id = t.id and e.version = t.version
		where e.after is null or e.after -> t."column" is distinct from t.value`);
	expect(lost.slice(0, 3), `acknowledged saves that are not in the trail: ${lost.length}`).toEqual(
		[]
	);
	await none(
		db,
		'acknowledged saves without their row',
		`select t.* from jsonb_to_recordset('${JSON.stringify(kept)}') as t(id uuid, version int)
		left join app.measurement m on m.id = t.id where m.id is null or m.version < t.version`
	);
	await none(
		db,
		'values that are not what their trail adds up to',
		`select m.id, m.version, count(e.id) as events from app.measurement m
		left join audit.event e on e.record = 'measurement' and e.record_id = m.id::text
		group by m.id having count(e.id) <> m.version
			or app.folded(e.after order by e.id) - 'version' is distinct from to_jsonb(m) - 'version'`
	);
	await none(
		db,
		'events of values that are not there',
		`select e.id from audit.event e left join app.measurement m on m.id::text = e.record_id
		where e.record = 'measurement' and e.action = 'create' and m.id is null`
	);
	await none(
		db,
		'values written in another transaction than their last event',
		`select m.id from app.measurement m
		join lateral (select xid from audit.event e where e.record = 'measurement' and e.record_id = m.id::text order by id desc limit 1) e on true
		where m.xmin::text::numeric <> (e.xid::text)::numeric % 4294967296`
	);
	// Inker LA et al. New England Journal of Medicine 2021;385:1737–1749, for a woman; creatinine in µmol/L ÷ 88.4.
	await none(
		db,
		'filtration rates that do not follow from the creatinine beside them',
		`with pairs as (
			select v.id, max(m.value) filter (where k.key = 'creatinine') as creatinine,
				max(m.value) filter (where k.key = 'egfr') as egfr,
				extract(year from age(v.happened_on, (s.characteristics ->> 'birth-date')::date)) as age
			from app.visit v join app.measurement m on m.visit_id = v.id join app.measure k on k.id = m.measure_id
			join app.subject s on s.id = v.subject_id
			group by v.id, s.id
		), told as (
			select *, creatinine / 88.4 / 0.7 as ratio from pairs where creatinine is not null or egfr is not null
		)
		select * from told where creatinine is null or egfr is null or abs(egfr -
			142 * power(least(ratio, 1), -0.241) * power(greatest(ratio, 1), -1.2) * power(0.9938, age) * 1.012) > 0.051`
	);
}

/** Every acknowledged booking has its appointment, its booked visit, its mail and its job, all of one transaction. */
export async function expectWholeBookings(
	db: FreshDatabase,
	{ booked }: BookingTally
): Promise<void> {
	await none(
		db,
		'acknowledged bookings that are not there',
		`select t.* from jsonb_to_recordset('${JSON.stringify(booked)}') as t("appointmentId" uuid, "visitId" uuid)
		left join app.appointment a on a.id = t."appointmentId" and a.visit_id = t."visitId"
		where a.status is distinct from 'booked'`
	);
	await none(
		db,
		'bookings with too little or too much',
		`select a.id, v.status, v.version,
			(select count(*) from app.mail m where m.appointment_id = a.id and m.kind = 'visit-invitation') as mails,
			(select count(*) from queue.job j join app.mail m on (j.data ->> 'mailId')::uuid = m.id
				where j.name = 'mail' and m.appointment_id = a.id) as jobs,
			(select count(*) from audit.event e where e.record = 'appointment' and e.record_id = a.id::text) as events,
			(select count(*) from audit.event e where e.record = 'visit' and e.record_id = v.id::text and e.action = 'change') as steps,
			(select count(distinct e.xid) from audit.event e where e.action <> 'change' and (e.record = 'appointment' and e.record_id = a.id::text
				or e.record = 'mail' and e.record_id in (select m.id::text from app.mail m where m.appointment_id = a.id))
				or e.record = 'visit' and e.record_id = v.id::text and e.action = 'change') as transactions
		from app.appointment a join app.visit v on v.id = a.visit_id
		where (v.status, v.version) is distinct from ('booked', 2)
			or (select count(*) from app.mail m where m.appointment_id = a.id and m.kind = 'visit-invitation') <> 1
			or (select count(*) from queue.job j join app.mail m on (j.data ->> 'mailId')::uuid = m.id
				where j.name = 'mail' and m.appointment_id = a.id) <> 1
			or (select count(*) from audit.event e where e.record = 'appointment' and e.record_id = a.id::text) <> 1
			or (select count(distinct e.xid) from audit.event e where e.action <> 'change' and (e.record = 'appointment' and e.record_id = a.id::text
				or e.record = 'mail' and e.record_id in (select m.id::text from app.mail m where m.appointment_id = a.id))
				or e.record = 'visit' and e.record_id = v.id::text and e.action = 'change') <> 1`
	);
	await none(
		db,
		'half-made bookings: a booked visit, a mail or a job by itself',
		`select v.id::text as what from app.visit v where v.status = 'booked'
			and not exists (select from app.appointment a where a.visit_id = v.id and a.status = 'booked')
		union all select m.id::text from app.mail m where m.appointment_id is null
		union all select j.id::text from queue.job j where j.name = 'mail'
			and not exists (select from app.mail m where m.id = (j.data ->> 'mailId')::uuid)`
	);
}
