"""Words of the trade for the tables and fields of the case file, and what later versions read."""

from __future__ import annotations

from collections.abc import Collection

from seqfault.case.wording import Spelling
from seqfault.errors import quoted

_TABLES = {
    "buses": "bus busbar busbars node nodes switchboard switchboards board boards",
    "infeeds": "infeed source sources grid grids utility utilities network supply supplies",
    "generators": "generator gens machine machines synchronous_machines synchronous_motors alternators",
    "motors": "motor induction_motors asynchronous_motors drives",
    "lines": "line cable cables feeder feeders overhead_lines branches circuits",
    "mutual_couplings": "mutual_coupling mutual mutuals couplings coupling coupled_lines",
    "transformers": "transformer trafo trafos xfmr xfmrs power_transformers auto_transformers",
    "earthing_transformers": "earthing_transformer grounding_transformers grounding_transformer zigzag "
    "zigzags neutral_earthing_transformers earthing_trafos",
    "neutrals": "neutral earthing earthings grounding groundings ngr ngrs ner ners "
    "neutral_earthing_resistors neutral_grounding_resistors earthing_resistors star_points",
    "series_reactors": "series_reactor reactor reactors current_limiting_reactors",
    "capacitors": "capacitor capacitor_banks shunt_capacitors banks shunts",
    "loads": "load consumers consumer",
    "converters": "converter inverter inverters pv solar wind batteries battery",
    "ties": "tie coupler couplers bus_couplers bus_ties switches section_switches",
    "relays": "relay protection protections protective_relays protection_relays devices",
    "current_transformers": "current_transformer ct cts toroids",
    "demands": "demand requirements requirement criteria settings",
    "scenarios": "scenario states cases",
    "prefault": "pre_fault",
    "frequency": "f hz nominal_frequency",
    "base_power": "base sbase base_mva mva_base s_base",
    "title": "name heading project",
}
_FIELDS = {
    "length": "length_km km length_m l distance",
    "z1": "r1 x1 z r x zpos z_1 r1x1 impedance",
    "z0": "r0 x0 zzero z_0",
    "z2": "zneg z_2 r2",
    "c1": "c c_1 capacitance",
    "b1": "b b_1 susceptance",
    "x2": "negative_sequence x_2",
    "x0": "zero_sequence x_0",
    "rating": "mva kva s rated_power rated_mva sr size power",
    "shaft_power": "kw hp mechanical_power p output rated_power_kw",
    "voltage": "kv v vn un ur u rated_voltage nominal_voltage base_kv nominal",
    "impedance": "uk ukr uk_percent z_percent percent_impedance z1 z xk short_circuit_voltage",
    "load_loss": "copper_loss copper_losses load_losses losses pk pkr",
    "x_over_r": "xr x_r x/r x_r_ratio xr_ratio r_over_x",
    "x0_over_r0": "x0r0 x0_r0 xr0 x0/r0",
    "z0_over_z1": "z0z1 z0_z1 z0/z1",
    "subtransient": "xd\" xdss xd2 x\"d x1 x subtransient_reactance xd''",
    "transient": "xd' x'd xds transient_reactance",
    "synchronous": "xd synchronous_reactance",
    "resistance": "r ra r1 resistor ohms",
    "reactance": "x reactor",
    "three_phase": "ik3 ik isc fault_level short_circuit_power short_circuit_current mva_sc sc "
    "fault_current",
    "line_ground": "ik1 earth_fault_level earth_fault line_earth single_phase",
    "vector_group": "group connection winding winding_group clock",
    "hv": "primary high hv_side",
    "lv": "secondary low lv_side",
    "tv": "tertiary third tv_side",
    "z0_magnetising": "zm zm0 z0m z0_mag z0_magnetizing",
    "connection": "connected wiring",
    "capacitance": "c farads",
    "power": "q kvar mvar reactive_power rating",
    "detuning": "mistuning tuning",
    "loss": "losses",
    "closed": "normally_closed state",
    "bus": "node busbar at connected_to bus_name",
    "from": "from_bus bus1 start source sending",
    "to": "to_bus bus2 end receiving",
    "neutral": "earthing grounding star_point starpoint ngr ner neutral_earthing",
    "count": "n number parallel circuits quantity units parallel_circuits",
    "locked_rotor": "lrc lra starting_current locked_rotor_current ilr start_current",
    "efficiency": "eff eta",
    "power_factor": "pf cos_phi cosphi cos",
    "current": "let_through rated_current i let_through_current",
    "continuous": "continuous_current continuous_rating",
    "duration": "time rated_time t",
    "temperature_rise": "temp_rise rise",
    "magnetic_circuit": "core core_type core_form",
    "tap": "tap_position tap_percent",
    "note": "notes comment comments description remark remarks",
    "out": "out_of_service in_service disabled status off",
    "open": "normally_open open_at open_point",
    "state": "loading profile",
    "at": "bus place location position terminal element",
    "measures": "measure measured quantity function kind type",
    "ct": "current_transformer cts current_transformers ct_ratio",
    "vt": "voltage_transformer vts pt pts vt_ratio",
    "direction": "directional",
    "characteristic_angle": "rca mta maximum_torque_angle relay_characteristic_angle angle",
    "polarisation": "polarization polarising polarizing polarised_by",
    "pickup": "pick_up setting plug_setting i> ie> io> i0> threshold start",
    "curve": "characteristic curve_type",
    "multiplier": "tms td tds time_dial time_multiplier tm",
    "delay": "time_delay operate_time definite_time t> time t",
    "minimum_time": "least_time minimum_operate_time dmt definite_minimum_time",
    "instant": "instantaneous high_set inst i>> ie>> stage_2 second_stage",
    "steps": "step scales scale ranges",
    "protects": "protect protected zone covers",
    "backs_up": "backup back_up backs backup_of behind",
    "breaker_time": "cb_time clearing_time breaker_operating_time",
    "ratio": "ct_ratio turns_ratio rated_ratio",
    "class": "accuracy accuracy_class ct_class class_",
    "burden": "rated_burden va rated_output",
    "connected_burden": "actual_burden burden_connected",
    "winding_resistance": "rct r_ct secondary_resistance",
    "knee_point": "vk uk ek knee_point_voltage knee",
    "fault_resistances": "rf fault_resistance resistances",
    "see": "sensitivity sensitivity_factor",
    "keep_still": "stability stability_factor security",
    "least": "minimum least_states min",
    "margin": "margins grading_margin",
    "breaker": "breaker_time circuit_breaker",
}
# Words of the trade for words of the file; what two of them share is left to the engineer.
_WORDS = {
    "IEC standard inverse": "si ni nsi standard_inverse normal_inverse normally_inverse inverse "
    "iec_inverse iec_normal_inverse iec_normally_inverse iec_a iec_si standard",
    "IEC very inverse": "vi very_inverse iec_b iec_vi",
    "IEC extremely inverse": "ei extremely_inverse iec_c iec_ei",
    "IEC long-time inverse": "lti long_time_inverse iec_lti long_inverse",
    "IEEE moderately inverse": "mi moderately_inverse ieee_mi inverse",
    "IEEE very inverse": "vi very_inverse ieee_vi",
    "IEEE extremely inverse": "ei extremely_inverse ieee_ei",
    "definite": "dt dtl definite_time independent independent_time dmt",
    "residual": "earth ground earth_fault 3i0 residually_connected",
    "core-balance": "cbct toroid core_balance_ct window zero_sequence_ct",
    "neutral": "neutral_current standby_earth_fault star_point",
    "phase": "overcurrent phases line",
    "negative-sequence": "i2 unbalance",
    "neutral-voltage": "neutral_displacement displacement residual_voltage 3v0 v0 nvd",
}
# Named on the page of the case format and not read by this version.
LATER_TABLES = ("breakers",)
_PARTS = ("r", "x", "r1", "x1", "r0", "x0")


def table_for(word: str, known: Collection[str]) -> str | None:
    """Return the table that ``word`` means, or None."""
    return _meant(word, _TABLES, known)


def field_for(word: str, known: Collection[str]) -> str | None:
    """Return which of the ``known`` fields ``word`` means, or None."""
    return _meant(word, _FIELDS, known)


def words_for(word: str, known: Collection[str]) -> tuple[str, ...]:
    """Return those of the ``known`` words that ``word`` may mean, none or several."""
    plain = word.strip().lower().replace("-", "_").replace(" ", "_")
    meant = tuple(name for name, others in _WORDS.items() if name in known and plain in others.split())
    nearest = None if meant else Spelling(known).nearest(word)
    return meant if nearest is None else (nearest,)


def unknown_field(word: str, meant: str | None, known: Collection[str]) -> str:
    """Return what to say of a field that is none; ``meant`` is what it seems to stand for."""
    problem = f"there is no field {quoted(word)}"
    if meant in ("z1", "z0") and word.lower() in _PARTS:
        return f'{problem}; write {meant} with both parts, as in "0.125+j0.096 ohm/km"'
    if meant is not None:
        return f"{problem}; write {meant}"
    return f"{problem}; there are {', '.join(known)}"


def _meant(word: str, synonyms: dict[str, str], known: Collection[str]) -> str | None:
    plain = word.strip().lower().replace("-", "_").replace(" ", "_")
    if plain in known:
        return plain
    for name, others in synonyms.items():
        if name in known and plain in others.split():
            return name
    return Spelling(known).nearest(plain)
