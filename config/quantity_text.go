package config

import "strings"

// ParseLength reads a length such as "300.0(5) mm", "11.8in"; in mm. Every
// Parse function returns a Problem, with its mend, as the error.
func ParseLength(text string) (Length, error) { return parseAs(lengthDim, text, toLength) }

// ParseMass reads a mass such as "12.40 kg", "27.3 lb"; in kg.
func ParseMass(text string) (Mass, error) { return parseAs(massDim, text, toMass) }

// ParseForce reads a force such as "98 N", "22 lbf"; in N.
func ParseForce(text string) (Force, error) { return parseAs(forceDim, text, toForce) }

// ParseStress reads a stress or modulus such as "11500 MPa"; in MPa.
func ParseStress(text string) (Stress, error) { return parseAs(stressDim, text, toStress) }

// ParseDuration reads a time such as "10 min", "365 d", "1 a"; in s. A bare m
// is refused: it is metres.
func ParseDuration(text string) (Duration, error) { return parseAs(durationDim, text, toDuration) }

// ParseTemperature reads a temperature such as "20 C", "68 F", "293.15 K"; in
// degrees Celsius.
func ParseTemperature(text string) (Temperature, error) {
	return parseAs(temperatureDim, text, toTemperature)
}

// ParseCompliance reads a compliance such as "0.00005 mm/N"; in mm/N.
func ParseCompliance(text string) (Compliance, error) {
	return parseAs(complianceDim, text, toCompliance)
}

// ParseStiffness reads a stiffness such as "0.02 N/mm"; in N/mm.
func ParseStiffness(text string) (Stiffness, error) { return parseAs(stiffnessDim, text, toStiffness) }

// ParseArea reads an area such as "5310 mm2"; in mm2.
func ParseArea(text string) (Area, error) { return parseAs(areaDim, text, toArea) }

// ParseSecondMoment reads a second moment of area such as "6.4e5 mm4"; in mm4.
func ParseSecondMoment(text string) (SecondMoment, error) {
	return parseAs(secondMomentDim, text, toSecondMoment)
}

// ParseSize reads a number of bytes such as "16 MB"; in bytes.
func ParseSize(text string) (Size, error) { return parseAs(sizeDim, text, toSize) }

// ParseNumber reads a plain number such as "1.0004", "10.02(2)".
func ParseNumber(text string) (Number, error) {
	n, problem := parseNumber(text, false)
	if problem != nil {
		return Number{}, *problem
	}
	return n, nil
}

// ParseWeight reads what a load is set to: a mass ("12.40kg", "27.3 lb") or a
// force ("98 N", "22 lbf"). A negative weight is refused: nothing hangs upward.
func ParseWeight(text string) (Weight, error) {
	w, problem := parseWeight(text)
	if problem != nil {
		return Weight{}, *problem
	}
	return w, nil
}

func toLength(q Quantity) Length             { return Length{q} }
func toMass(q Quantity) Mass                 { return Mass{q} }
func toForce(q Quantity) Force               { return Force{q} }
func toStress(q Quantity) Stress             { return Stress{q} }
func toDuration(q Quantity) Duration         { return Duration{q} }
func toTemperature(q Quantity) Temperature   { return Temperature{q} }
func toCompliance(q Quantity) Compliance     { return Compliance{q} }
func toStiffness(q Quantity) Stiffness       { return Stiffness{q} }
func toArea(q Quantity) Area                 { return Area{q} }
func toSecondMoment(q Quantity) SecondMoment { return SecondMoment{q} }
func toSize(q Quantity) Size                 { return Size{q} }

func parseAs[T any](d *dimension, text string, as func(Quantity) T) (T, error) {
	q, problem := d.parse(text)
	if problem != nil {
		var none T
		return none, *problem
	}
	return as(q), nil
}

func parseWeight(text string) (Weight, *Problem) {
	shown := strings.TrimSpace(text)
	_, rest, problem := scanNumber(shown)
	if problem != nil {
		if shown == "" {
			problem.Fix = "write a mass or a force, such as 12.40 kg or 98 N"
		}
		return Weight{}, problem
	}
	name := plainUnit(strings.TrimSpace(rest))
	if name == "" {
		return Weight{}, &Problem{What: quoted(shown) + " has no unit: a load is a mass or a force",
			Fix: "write the unit: " + shown + " kg (or g, lb, oz; or as a force N, kN, lbf)"}
	}
	w := Weight{Shown: shown}
	var q Quantity
	if _, isForce := forceDim.find(name); isForce {
		q, problem = forceDim.parse(shown)
		w.Force = &Force{q}
	} else {
		q, problem = massDim.parse(shown)
		w.Mass = &Mass{q}
	}
	if problem != nil {
		return Weight{}, problem
	}
	if q.Value < 0 {
		return Weight{}, &Problem{What: quoted(shown) + " is negative: a load is positive downward",
			Fix: "write what hangs there afterwards, not the change; 0 kg for nothing"}
	}
	return w, nil
}
