-- The role stays: it belongs to the cluster and other databases may use it.
drop table chain_head, ledger, set_aside, reaction_plan, cause, change, characteristic_state, checkpoint, signal,
    matter, subgroup, round, boundary, revision, setup, characteristic, gauge, machine_state, stream, machine, part,
    station, line, sessions, person, shift, plant;
