//! Reading, composing and converting units.

use super::*;

fn unit(text: &str) -> Unit {
    Unit::parse(text).unwrap()
}

#[test]
fn reads_and_writes() {
    #[track_caller]
    fn case(text: &str, symbol: &str) {
        let read = unit(text);
        assert_eq!(read.symbol(), symbol);
        assert_eq!(unit(symbol), read);
    }
    case("mg/L", "mg/L");
    case("mg/l", "mg/L");
    case("mg L^-1", "mg/L");
    case("mg·L-1", "mg/L");
    case(" µmol / kg ", "umol/kg");
    case("μmol/kg(solution)", "umol/kg(solution)");
    case("mol/kg(water)", "mol/kg(water)");
    case("mg/L as NO3^-", "mg/L as NO3^-");
    case("mg/L as  N ", "mg/L as N");
    case("°C", "degC");
    case("J/(mol K)", "J/(mol K)");
    case("J/mol/K", "J/(mol K)");
    case("J mol^-1 K^-1", "J/(mol K)");
    case("mol/(L atm)", "mol/(L atm)");
    case("cm3/mol", "cm3/mol");
    case("cm^3/mol", "cm3/mol");
    case("cm3/(mol bar)", "cm3/(mol bar)");
    case("kg^(1/2)/mol^(1/2)", "kg^(1/2)/mol^(1/2)");
    case("(kg(water)/mol)^2", "kg(water)^2/mol2");
    case("1/K", "1/K");
    case("1", "1");
    case("%", "%");
    case("mg mg/mg", "mg");
}

#[test]
fn refuses() {
    #[track_caller]
    fn case(text: &str, expected: &str) {
        let message = Unit::parse(text).unwrap_err().to_string();
        assert!(message.contains(expected), "{message}");
    }
    case("J/mol K", "a product takes brackets, such as `J/(mol K)`");
    case("mg/L CaCO3", "a substance takes `as`, such as `mg/L as N`");
    case("mg/L as", "name the substance after `as`");
    case("", "it is empty; write `1` for a pure number");
    case("mg/", "a unit is missing at the end");
    case("mg/100 mL", "a unit was expected where `1` stands");
    case("10", "a unit was expected where `1` stands");
    case("mg/(L", "a `)` is missing");
    case("mg/L)", "`)` is left over");
    case("m^x", "after `^` a whole number is expected");
    case("m999", "powers have one or two digits");
    case("((m99)99)99", "no quantity has such a power");
    case("m^(1/13)", "no quantity has such a power");
    case("(((((m)))))", "nested too deeply");
    case("umoll", "unknown unit `umoll` (did you mean `umol`?)");
    case("umol/kgg", "(did you mean `umol/kg`?)");
    case("mM", "(did you mean `mmol/L`?)");
    case("mol/kg(watr)", "(did you mean `mol/kg(water)`?)");
}

#[test]
fn converts() {
    #[track_caller]
    fn case(value: f64, from: &str, to: &str, expected: f64) {
        assert_eq!(unit(from).convert(value, &unit(to)).unwrap(), expected);
    }
    // Decimal shifts are exact, or as near as the result can be written.
    case(41.2, "mg/L", "g/L", 0.0412);
    case(41.2, "ug/L", "mg/m3", 41.2);
    case(420.0, "uatm", "atm", 420e-6);
    case(2.35, "meq/L", "mol/L", 2.35e-3);
    case(1.0, "g/mL", "kg/m3", 1000.0);
    case(1.0, "cm3/mol", "L/mol", 1e-3);
    // Exact by definition.
    case(1.0, "atm", "bar", 1.01325);
    case(1.0, "kcal/mol", "kJ/mol", 4.184);
    case(25.0, "degC", "K", 298.15);
    case(0.0, "dbar", "bar", 1.01325);
    case(1.0, "J", "V C", 1.0);
    case(1.0, "J/(mol degC)", "J/(mol K)", 1.0);
    case(3.5, "%", "1", 0.035);
    case(2.0, "ppm", "mg/kg(solution)", 2.0);
    case(35.0, "g/kg", "%", 3.5);
    case(1.0, "nm^-2", "1/m2", 1e18);
    let freezing = unit("degF").convert(32.0, &unit("degC")).unwrap();
    assert!(freezing.abs() < 1e-12); // 5/9 is no binary fraction
    let root = unit("kg^(1/2)").convert(1.0, &unit("g^(1/2)")).unwrap();
    assert!((root / 1000f64.sqrt() - 1.0).abs() < 1e-15);
}

#[test]
fn keeps_apart() {
    #[track_caller]
    fn case(from: &str, to: &str, reason: &str) {
        match unit(from).convert(1.0, &unit(to)) {
            Err(UnitError::NotConvertible { reason: found, .. }) => {
                assert!(found.contains(reason), "{found}")
            }
            other => panic!("{other:?}"),
        }
    }
    case("mol/kg(water)", "mol/kg(solution)", "weigh differently");
    case("mol/kg", "mol/kg(water)", "weigh differently");
    case("mg/kg", "ppm", "weigh differently");
    case("mol/L", "mol/kg(water)", "density");
    case("mg/L", "mol/L", "molar mass");
    case("PSU", "g/kg", "conductivity ratio");
    case("mg/L as N", "mg/L as NO3^-", "different substances");
    case("mg/L", "meq/L", "molar mass");
    case("mg/L", "degC", "different things");
}

#[test]
fn products_and_ratios() {
    assert_eq!(unit("mol/kg").times(&unit("kg")).unwrap(), unit("mol"));
    assert_eq!(unit("mol/L").over(&unit("kg/L")).unwrap(), unit("mol/kg"));
    assert!(unit("mol/L").over(&unit("kg/L")).unwrap().has_bare_kg());
    assert!(unit("mg/L as N").over(&unit("mg/L as N")).unwrap().is_dimensionless());
    assert!(unit("mg/L as N").times(&unit("mg/L as P")).is_err());
    assert!(unit("m99").times(&unit("m")).is_err());
    assert!(unit("ug/mL").is_same_size(&unit("mg/L")));
    assert!(!unit("K").is_same_size(&unit("degC")));
    assert_eq!(unit("mol/kg").per_kg_of(KgOf::Solution), unit("mol/kg(solution)"));
    assert_eq!(unit("kg/L").per_kg_of(KgOf::Solution), unit("kg/L")); // a density weighs the solution anyway
}

#[test]
fn styles() {
    assert_eq!(unit("umol/kg").display(Style::Unicode), "µmol/kg");
    assert_eq!(unit("J/(umol degC)").display(Style::Unicode), "J/(µmol °C)");
    assert_eq!(unit("ug/L as U").display(Style::Unicode), "µg/L as U");
    assert_eq!(unit("ug/L as U").to_string(), "ug/L as U");
}

#[test]
fn every_listed_unit_reads_and_belongs() {
    for (position, kind) in Kind::ALL.into_iter().enumerate() {
        assert_eq!(kind as usize, position);
        for listed in kind.units() {
            let read = unit(listed);
            assert_eq!(read.symbol(), *listed);
            assert!(kind.accepts(&read), "{listed}");
            // Symbols are unambiguous: what a style writes, the reader reads.
            assert_eq!(unit(&read.display(Style::Unicode)), read);
        }
        assert_eq!(Kind::named(kind.name()).unwrap(), kind);
    }
}

#[test]
fn kinds() {
    assert_eq!(Kind::Temperature.default_unit(), unit("degC"));
    assert_eq!(Kind::MolarVolume.default_unit(), unit("cm3/mol"));
    assert!(Kind::Amount.accepts(&unit("mmol/m3")));
    assert!(!Kind::Amount.accepts(&unit("mmol")));
    assert!(!Kind::Temperature.accepts(&unit("K as N")));
    assert!(units_of("amount").unwrap().contains(&"ug/L"));
    let message = units_of("temprature").unwrap_err().to_string();
    assert!(
        message.starts_with("unknown kind of unit `temprature` (did you mean `temperature`?)"),
        "{message}"
    );
    let message = Kind::Salinity.parse_unit("PPU").unwrap_err().to_string();
    assert!(message.contains("did you mean `PSU`?"), "{message}");
    let message = Kind::Pressure.parse_unit("atmm").unwrap_err().to_string();
    assert!(message.contains("`atm`") && message.contains("units of pressure: bar, mbar"), "{message}");
}

#[test]
fn conditions() {
    assert_eq!(Temperature::from_celsius(25.0).unwrap(), Temperature::REFERENCE);
    assert!(Temperature::from_celsius(-273.16).is_err());
    assert!(Temperature::from_kelvin(f64::NAN).is_err());
    assert_eq!(Temperature::from_kelvin(273.15).unwrap().celsius(), 0.0);
    assert_eq!(Pressure::from_atm(1.0).unwrap(), Pressure::ATMOSPHERE);
    assert_eq!(Pressure::from_sea_pressure_dbar(0.0).unwrap(), Pressure::ATMOSPHERE);
    assert!((Pressure::from_pascal(101_325.0).unwrap().atm() - 1.0).abs() < 1e-15);
    assert!(Pressure::from_bar(-0.1).is_err());
}

proptest::proptest! {
    #[test]
    fn no_text_panics(text in "\\PC{0,60}", near in "[a-zA-Zµ1%/()^ *·.0-9-]{0,40}") {
        for text in [text, near] {
            if let Ok(read) = Unit::parse(&text) {
                proptest::prop_assert_eq!(&unit(&read.symbol()), &read);
                let _ = read.times(&read).and_then(|square| square.convert(1.0, &read));
            }
        }
    }
}
