-- Canonical dump: one statement per table, each giving one JSON text per row.
-- Surrogate ids become natural keys; moments of our clock, counters of
-- attempts and revision counters of sets (how many times a set was touched
-- depends on how files were batched) are left out.

-- table: settings
SELECT jsonb_build_object('sha256', encode(sha256, 'hex')) FROM settings t;
-- table: watermark
SELECT jsonb_build_object('key', key) FROM watermark t;
-- table: root_state
SELECT to_jsonb(t) - '{since,looked_at,clock_offset_s,complete_up_to,settling,newest_at,files,litter}'::text[] FROM root_state t;
-- table: root_lease
SELECT jsonb_build_object('root', root) FROM root_lease t WHERE false;
-- table: content
SELECT jsonb_build_object('sha256', encode(sha256, 'hex'), 'size', size) FROM content t;
-- table: file
SELECT to_jsonb(t) - '{id,seen_at,taken_at,mod_time,replaces,twin_of,settings_id,sha256,late}'::text[] || jsonb_build_object(
    'sha256', encode(t.sha256, 'hex'), 'settings', (SELECT encode(s.sha256, 'hex') FROM settings s WHERE s.id = t.settings_id),
    'replaces', (SELECT f.revision FROM file f WHERE f.id = t.replaces),
    'twin_of', (SELECT f.root || '/' || f.path || '#' || f.revision FROM file f WHERE f.id = t.twin_of)) FROM file t;
-- table: file_state
SELECT to_jsonb(t) - '{id,file_id,at}'::text[] || jsonb_build_object('file', file_key(file_id)) FROM file_state t;
-- table: grid
SELECT jsonb_build_object('sha256', encode(sha256, 'hex'), 'n', cardinality(wavelength_nm)) FROM grid t;
-- table: scan
SELECT to_jsonb(t) - '{id,file_id,grid,absorbance}'::text[] || jsonb_build_object('file', file_key(file_id), 'grid', encode(grid, 'hex'),
    'absorbance', encode(sha256(convert_to(absorbance::text, 'UTF8')), 'hex')) FROM scan t;
-- table: reading
SELECT to_jsonb(t) - '{id,file_id}'::text[] || jsonb_build_object('file', file_key(file_id)) FROM reading t;
-- table: calibration
SELECT to_jsonb(t) - '{id,file_id}'::text[] || jsonb_build_object('file', file_key(file_id)) FROM calibration t;
-- table: calibration_point
SELECT to_jsonb(t) - '{calibration_id}'::text[] || jsonb_build_object('calibration', calibration_key(calibration_id)) FROM calibration_point t;
-- table: calibration_figures
SELECT to_jsonb(t) - '{id,calibration_id,at}'::text[] || jsonb_build_object('calibration', calibration_key(calibration_id)) FROM calibration_figures t;
-- table: sheet_row
SELECT to_jsonb(t) - '{file_id}'::text[] || jsonb_build_object('file', file_key(file_id)) FROM sheet_row t;
-- table: event
SELECT to_jsonb(t) - '{id,file_id}'::text[] || jsonb_build_object('file', file_key(file_id)) FROM event t;
-- table: plan_row
SELECT to_jsonb(t) - '{file_id}'::text[] || jsonb_build_object('file', file_key(file_id)) FROM plan_row t;
-- table: sample_set
SELECT to_jsonb(t) - '{id,revision,first_seen,last_seen,ph_at,completed_at,deadline}'::text[] FROM sample_set t;
-- table: set_state
SELECT to_jsonb(t) - '{id,set_id,revision,at}'::text[] || jsonb_build_object('set', set_key(set_id)) FROM set_state t
WHERE t.id = (SELECT max(x.id) FROM set_state x WHERE x.set_id = t.set_id);
-- table: member
SELECT to_jsonb(t) - '{id,set_id,file_id,scan_id,at,changed_at}'::text[] || jsonb_build_object('set', set_key(set_id), 'file', file_key(file_id),
    'scan', (SELECT c.idx FROM scan c WHERE c.id = t.scan_id)) FROM member t;
-- table: result
SELECT to_jsonb(t) - '{id,set_id,set_revision,settings_id,input_sha256,at,calibration_id,because,record}'::text[] || jsonb_build_object('key', result_key(t.id),
    'input', encode(t.input_sha256, 'hex'),
    'calibration', calibration_key(calibration_id)) FROM result t JOIN standing s ON s.result_id = t.id WHERE s.current;
-- table: result_pka
SELECT to_jsonb(t) - '{result_id}'::text[] || jsonb_build_object('result', result_key(result_id)) FROM result_pka t JOIN standing s USING (result_id) WHERE s.current;
-- table: result_check
SELECT to_jsonb(t) - '{result_id}'::text[] || jsonb_build_object('result', result_key(result_id)) FROM result_check t JOIN standing s USING (result_id) WHERE s.current;
-- table: result_component
SELECT to_jsonb(t) - '{result_id}'::text[] || jsonb_build_object('result', result_key(result_id)) FROM result_component t JOIN standing s USING (result_id) WHERE s.current;
-- table: result_rung
SELECT to_jsonb(t) - '{result_id}'::text[] || jsonb_build_object('result', result_key(result_id)) FROM result_rung t JOIN standing s USING (result_id) WHERE s.current;
-- table: result_spectrum
SELECT to_jsonb(t) - '{result_id,grid,value,sd}'::text[] || jsonb_build_object('result', result_key(result_id), 'grid', encode(grid, 'hex'),
    'value', encode(sha256(convert_to(value::text || sd::text, 'UTF8')), 'hex')) FROM result_spectrum t JOIN standing s USING (result_id) WHERE s.current;
-- table: result_input
SELECT to_jsonb(t) - '{result_id,file_id,scan_id,idx}'::text[] || jsonb_build_object('result', result_key(result_id), 'file', file_key(file_id),
    'scan', (SELECT c.idx FROM scan c WHERE c.id = t.scan_id)) FROM result_input t JOIN standing s USING (result_id) WHERE s.current;
-- table: result_figure
SELECT to_jsonb(t) - '{result_id}'::text[] || jsonb_build_object('result', result_key(result_id)) FROM result_figure t JOIN standing s USING (result_id) WHERE s.current;
-- table: result_status
SELECT to_jsonb(t) - '{id,result_id,case_id,at,because}'::text[] || jsonb_build_object('result', result_key(result_id), 'case', case_key(case_id))
FROM result_status t JOIN standing s USING (result_id) WHERE s.current;
-- table: standing
SELECT to_jsonb(t) - '{result_id,set_id,released_at}'::text[] || jsonb_build_object('result', result_key(result_id), 'released', released_at IS NOT NULL)
FROM standing t WHERE current;
-- table: drift_case
SELECT to_jsonb(t) - '{id,opened_at}'::text[] FROM drift_case t;
-- table: case_state
SELECT to_jsonb(t) - '{id,case_id,at}'::text[] || jsonb_build_object('case', case_key(case_id)) FROM case_state t
WHERE t.id = (SELECT max(x.id) FROM case_state x WHERE x.case_id = t.case_id);
-- table: case_ranking
SELECT to_jsonb(t) - '{case_id,at}'::text[] || jsonb_build_object('case', case_key(case_id)) FROM case_ranking t
WHERE t.at = (SELECT max(x.at) FROM case_ranking x WHERE x.case_id = t.case_id);
-- table: case_reach
SELECT to_jsonb(t) - '{id,case_id,result_id,at}'::text[] || jsonb_build_object('case', case_key(case_id), 'result', result_key(result_id))
FROM case_reach t JOIN standing s USING (result_id)
WHERE s.current AND t.id = (SELECT max(x.id) FROM case_reach x WHERE x.case_id = t.case_id AND x.result_id = t.result_id);
-- table: point
SELECT to_jsonb(t) - '{id,set_id,result_id,calibration_id}'::text[] || jsonb_build_object('set', set_key(t.set_id), 'result', result_key(t.result_id),
    'calibration', calibration_key(calibration_id)) FROM point t LEFT JOIN standing s USING (result_id) WHERE t.result_id IS NULL OR s.current;
-- table: baseline
SELECT to_jsonb(t) - '{id,at,frozen_at}'::text[] || jsonb_build_object('frozen', frozen_at IS NOT NULL) FROM baseline t;
-- table: point_judgement
SELECT to_jsonb(t) - '{id,point_id,baseline_id,at}'::text[] || jsonb_build_object('point', point_key(point_id), 'baseline', (SELECT b.version FROM baseline b WHERE b.id = baseline_id))
FROM point_judgement t JOIN point p ON p.id = t.point_id LEFT JOIN standing s ON s.result_id = p.result_id
WHERE (p.result_id IS NULL OR s.current) AND t.id = (SELECT max(x.id) FROM point_judgement x WHERE x.point_id = t.point_id);
-- table: bracket
SELECT to_jsonb(t) - '{id,opened_by_set,closed_by_set,at}'::text[] || jsonb_build_object('opened', set_key(opened_by_set), 'closed', set_key(closed_by_set)) FROM bracket t;
-- table: bracket_set
SELECT jsonb_build_object('bracket', (SELECT b.key FROM bracket b WHERE b.id = bracket_id), 'set', set_key(set_id)) FROM bracket_set t;
-- table: instrument_state
SELECT to_jsonb(t) - '{id,case_id,at}'::text[] || jsonb_build_object('case', case_key(case_id)) FROM instrument_state t;
-- table: message
SELECT to_jsonb(t) - '{id,case_id,at,html,json}'::text[] || jsonb_build_object('case', case_key(case_id)) FROM message t;
-- table: delivery
SELECT jsonb_build_object('message', (SELECT m.key FROM message m WHERE m.id = message_id), 'sink', sink, 'state', state) FROM delivery t;
-- table: delivery_attempt
SELECT jsonb_build_object('delivery', delivery_id) FROM delivery_attempt t WHERE false;
-- table: deed
SELECT to_jsonb(t) - '{seq,at,os_user,settings_id,prev,hash}'::text[] FROM deed t;
