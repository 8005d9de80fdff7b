use super::*;

#[test]
fn what_is_beside_a_water_is_read_where_it_is_written() {
    fails(
        "sample(#{ pH: 7 }).headspace(#{ volme: \"1 L\", p: #{ \"CO2(g)\": 0.1 } })",
        "unknown key `volme`",
        &["did you mean `volume`?"],
        "volme",
    );
    fails(
        "sample(#{ pH: 7 }).headspace(#{ volume: 0, p: #{ \"CO2(g)\": 0.1 } })",
        "`volume` is above zero, not 0 L",
        &[],
        "volume",
    );
    fails(
        "sample(#{ pH: 7 }).bubble(#{ volume: 1, pressure: 1, x: #{ \"CO2(g)\": 0.1 } })",
        "the mole fractions add up to 0.1, not to 1: name every gas, such as `N2(g)` for the rest",
        &[],
        "x",
    );
    fails(
        "sample(#{ pH: 7 }).exchanger(\"clay\", \"2 mg/kg\")",
        "the sites of an exchanger are equivalents per kilogram of water, above zero, such as `2 meq/kg`",
        &[],
        "\"2 mg/kg\"",
    );
    fails(
        "gas(#{ volume: 1, n: #{ \"CO2(g)\": \"400 ppm\" } })",
        "`CO2(g)`: a gas is not given in ppm",
        &["write its pressure, `\"420 uatm\"`, or mole fractions under `x`"],
        "\"CO2(g)\"",
    );
}

#[test]
fn what_the_ledger_lacks_is_said_at_equilibrium() {
    fails(
        "sample(#{ pH: 7 }).exchanger(\"clay\", \"2 meq/kg\").equilibrate()",
        "`clay`: the ledger has no exchange reactions of it",
        &["give them by `.with_reaction`, such as `2 NaX(clay) + Ca^2+ <=> CaX2(clay) + 2 Na^+`"],
        "equilibrate",
    );
    fails(
        "sample(#{ pH: 7 }).equilibrate().get(\"volume(bubble)\")",
        "`volume(bubble)`: there is no gas phase",
        &["`.headspace` and `.bubble` make one"],
        "\"volume(bubble)\"",
    );
    fails(
        "reaction(\"NaX + K^+ <=> KX + Na^+\", #{ log_k: 1 })",
        "`NaX`: X is a site of a solid, which goes into brackets: `NaX(clay)`, `XOH(ferric oxide)`",
        &[],
        "\"NaX + K^+ <=> KX + Na^+\"",
    );
}

#[test]
fn the_shipped_exchanger_softens_a_water() {
    shows(
        "let book = ledger(\"freshwater\").merge(ledger(\"sorption\"));
         let hard = sample(#{ pH: 7.5, alkalinity: \"4 mmol/kg\", Ca: \"2 mmol/kg\", Na: \"0.1 mmol/kg\" }).with_ledger(book);
         let soft = hard.exchanger(\"soil\", #{ capacity: \"20 meq/kg\", form: \"Na^+\" }).equilibrate();
         soft.total(\"Ca\").value < 0.1e-3 && soft.total(\"Na\").value > 3.9e-3",
        "true",
    );
}
