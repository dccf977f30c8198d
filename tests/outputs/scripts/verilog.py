"""Values of a Verilog-A module at given biases, by the compiler's own interpreter.

In: {"file", "ports": [formula ...], "parameters": {name: number}, "controls": [...]} on
standard input. Out: {"values": {port: [...]}, "ok": [...]}. Every parameter that the
compiled module asks for must be known: the interpreter would take 0 for it without a word.
"""
import json, sys
import openvaf_py

asked = json.load(sys.stdin)
module = openvaf_py.compile_va(asked["file"])[0]
parameters = {"control_scale": 1.0, "value_scale": 1.0, "mfactor": 1.0} | asked["parameters"]
kinds = dict(zip(module.param_names, module.param_kinds))
unknown = [n for n, kind in kinds.items() if kind == "param" and n not in parameters]
assert not unknown, f"parameters that nobody set: {unknown}"
missing = [n for n in asked["parameters"] if n not in kinds]
assert not missing, f"parameters that the module does not have: {missing}"
ports = asked["ports"] + ["ok"]
values = {port: [] for port in ports}
for control in asked["controls"]:
    given = {name: parameters.get(name, 0.0) for name in module.param_names}
    given["V(control,ref)"] = control
    residuals, _ = module.run_init_eval(given)
    # The branch equations stand last, in the order of the ports; V is 0 there.
    for port, (value, _) in zip(ports, residuals[-len(ports):]):
        values[port].append(value)
json.dump({"ok": values.pop("ok"), "values": values}, sys.stdout)
