# Answer the study's questions, a family at a time.
rule statistics:
    input:
        before=receipt("table", wiring.plan_id),
    output:
        receipt=receipt("statistics", wiring.plan_id),
    log:
        receipt("statistics", f"{wiring.plan_id}.log"),
    run:
        wiring.carry_out_study("statistics", output.receipt)
