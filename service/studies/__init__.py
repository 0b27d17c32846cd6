"""Questions of many cases as durable jobs: they outlive a request, a crash and a machine.

An analysis is a deterministic function of what it is handed by `evaluate`, wave by wave. Here that function is handed
an `evaluate` which divides each wave into chunks, has them computed by other processes and keeps every finished chunk
on disk; run again after a crash it comes back to where it was without computing a finished chunk twice.
"""
