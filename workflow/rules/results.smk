# Write what the paper prints.
rule results:
    input:
        before=receipt("statistics", wiring.plan_id),
    output:
        receipt=receipt("results", wiring.plan_id),
    log:
        receipt("results", f"{wiring.plan_id}.log"),
    run:
        wiring.publish(output.receipt)
