package table

import (
	"strings"
	"unicode"

	"golang.org/x/text/unicode/norm"
)

// Roles of columns beside those of [Role] and the short names of quantities;
// they become one of these once unit and behaviour are known.
const (
	roleLoad  = "load"  // across R_L or at the drain: what it does when current rises tells
	roleVth   = "vth"   // a threshold, at a current that is given elsewhere
	roleVolt  = "volt"  // just 'voltage'
	roleAmp   = "amp"   // just 'current'
	roleDrain = "drain" // voltage or current: the unit tells
	roleTime  = "time"  // elapsed, or a date: the cells tell
	roleTorT  = "t?"    // temperature or time: the unit tells
)

// How sure a word is: a weak one yields to any sure one.
const (
	sure = iota
	weak
	weaker
)

type word struct {
	role string
	rank int
}

// words maps header spellings, folded by [fold], to roles. English and the usual
// European ones (from memory, common practice).
var words = func() map[string]word {
	m := map[string]word{}
	add := func(role string, rank int, list string) {
		for _, w := range strings.Fields(list) {
			if w != "#" {
				w = fold(w)
			}
			if _, ok := m[w]; !ok {
				m[w] = word{role, rank}
			}
		}
	}
	add("vg", sure, `vg vgs ug ugs vgate ugate gate gatevoltage gatesourcevoltage gatetosourcevoltage vgatesource ugatesource
		vgatetosource gatebias biasvoltage gatebiasvoltage gatedrive vgbias vbias ubias gatespannung gatesourcespannung spannunggate gatevorspannung ansteuerspannung steuerspannung
		tensiongrille tensiondegrille tensiongrillesource grille vgrille ugrille tensionpuerta tensiondepuerta tensionpuertafuente voltajepuerta voltajedepuerta vpuerta
		puerta compuerta vcompuerta tensiongate tensionedigate tensionegate tensionedigatesource tensionporta tensaoporta tensaodeporta tensaogate poortspanning gatespanning
		napieciebramki ubramki bramka gatespenning gatespanning styrespenning styrspanning hilajannite napetihradla vgsq vgsidle vgq uзи uз`)
	add("vg", weak, `vgset vgsset vgateset gateset vgsoll ugsoll ugssoll setgate vset uset usoll vsoll vgnominal vgstep`)
	add("id", sure, `id ids idrain idd idq drainstrom draincurrent drainamps currentdrain idrainsource drainsourcecurrent idraintosource idmeas
		stromdrain courantdrain courantdedrain corrientedrenador corrientededrenador corrientedrenaje corrientededrenaje corrientedrain correntedrain
		correntedidrain correntedreno correntededreno drainstroom praddrenu idrenu drainstrom drainstrøm nieluvirta proudkolektoru proudemitoru iс
		quiescentcurrent idlecurrent ruhestrom courantrepos`)
	add("vl", sure, `vrl url vacrossrl uacrossrl voltageacrossrl voltageacrossload acrossrl vlacross spannunganrl spannungueberrl spannunguberrl vonrl
		vsense vshunt ushunt ur vr vresistor vrload urload vdrop`)
	add(roleLoad, sure, `vload uload vl ul load loadvoltage voltageload last vlast ulast lastspannung spannunglast out vout uout uaus output outputvoltage
		ausgang ausgangsspannung vcharge ucharge tensioncharge tensiondecharge tensionsortie tensiondesortie vsortie usortie vcarga ucarga tensioncarga tensiondecarga voltajecarga
		voltajedecarga carga vsalida vcarico ucarico tensionecarico tensionedicarico tensionedelcarico carico vuscita uscita belasting belastingsspanning lastspanning
		obciazenie uobciazenia uobc uн`)
	add("vd", sure, `vd vds ud uds vdrain udrain drainvoltage drainsourcevoltage draintosourcevoltage vdrainsource udrainsource drainspannung
		drainsourcespannung tensiondrain tensiondedrain tensiondrainsource tensiondrenador tensiondedrenador tensiondrenadorfuente voltajedrenador vdrenador tensionedrain tensionedidrain tensionedidrainsource
		tensaodreno drainspanning napieciedrenu udrenu uси uс`)
	add("vdd", sure, `vdd udd vcc ucc ub ubat ubatt vbat vbatt battery vsupply usupply supply supplyvoltage voltagesupply vpsu psu vplus versorgung
		versorgungsspannung betriebsspannung ubetrieb speisespannung uspeisung uversorgung batterie valim ualim alimentation tensionalimentation tensiondalimentation valimentation
		alimentacion valimentacion tensionalimentacion tensiondealimentacion alimentazione valimentazione tensionealimentazione tensionedialimentazione voedingsspanning
		voeding uzas zasilanie napieciezasilania upit`)
	add("ig", sure, `ig igs igss igate gatecurrent gateleakage gatestrom courantgrille courantdegrille corrientepuerta corrientedepuerta correntegate correntedigate pradbramki`)
	add("gm", sure, `gm gfs yfs transconductance mutualconductance steilheit vorwartssteilheit transconductancia transconduttanza transkonduktanz pente transconductantie transkonduktancja slope`)
	add("temp", sure, `temp temperature temperatur temperatura temperaturen tcase tc tamb ta tambient ths theatsink tsink tj tjunction tmount 
		tgehause tgehaeuse tumg tumgebung gehausetemperatur umgebungstemperatur kuhlkorper kuehlkoerper tkk ttab temperatuur teplota lampotila temperaturaambiente`)
	add("t", sure, `elapsed elapsedtime telapsed tsec seconds secs runtime laufzeit messzeit sekunden secondes segundos secondi tempsecoule tiempotranscurrido tempotrascorso dt`)
	add(roleTime, sure, `time zeit temps tiempo tempo tijd czas tid cas aika clock uhrzeit heure hora ora timeofday`)
	add(roleTorT, sure, `t`)
	add(roleVth, sure, `vth vgsth vgsoff uth ugsth ugsoff vt vto vt0 vp threshold thresholdvoltage gatethreshold gatethresholdvoltage schwelle schwellspannung
		schwellenspannung schwellwert einsatzspannung gateschwellspannung tensionseuil tensiondeseuil seuil vseuil umbral tensionumbral tensiondeumbral voltajeumbral vumbral soglia tensionesoglia
		tensionedisoglia vsoglia drempelspanning drempel napiecieprogowe progowe troskelspanning kynnysjannite prahovenapeti pinchoff uпор`)
	add(roleDrain, sure, `drain dreno drenaje drenador dren`)
	add(roleVolt, weaker, `voltage volt volts u v spannung tension voltaje tensione tensao spanning napiecie napeti spenning jannite`)
	add(roleAmp, weaker, `current i amps amp ampere amperes strom courant intensite corriente intensidad corrente stroom prad proud strøm virta`)

	add(string(RoleDevice), sure, `device devices dev deviceno devicenr deviceid deviceserial deviceundertest dut duts serial serialno serialnumber serialnr sn snr seriennr seriennummer
		bauteil bauteilnr bauteilnummer bauelement pruefling prufling prueflinge prueflingnr pruflingnr prueflingsnr pruflingsnr exemplar muster probe probenr transistor transistornr transistorno
		fet fets fetno fetnr mosfet mosfetno mosfetnr sample sampleid sampleno samplenr specimen specimenno echantillon echantillonno noechantillon nechantillon composant composantno
		eprouvette repere muestra muestrano nmuestra nomuestra dispositivo ejemplar espécimen campione campioneno ncampione esemplare matricola provenummer
		monster monsternr exemplaar serienummer numeroserie numerodeserie numerodiserie nserie noserie probka egzemplarz numerseryjny vzorek soucastka prøve prove prov nayte amostra
		komponent komponente componente composante obrazec образец транзистор`)
	add(string(RoleDevice), weak, `part partno partnr partnumber partid parts name names label unitid item itemno piece pieces stuck stueck teil teilnr teile pezzo pieza onderdeel element id ident identifier
		nom nombre nome naam nazwa bezeichnung kennung code barcode`)
	add(string(RoleDevice), weaker, `no nr n number num nummer lfdnr lfd laufendenummer laufnr numero numer index idx pos position # номер row`)

	add(string(RoleLot), sure, `lot lotno lotnr lotnumber lotid lots batch batchno batchnumber los losnr losnummer charge chargennr chargennummer lote nlote lotto partita partij sarze seria bag`)
	add(string(RolePackage), sure, `package packageno packageid packagename pkg gehause gehaeuse gehausenr flange flangeno boitier encapsulado contenitore behuizing obudowa pouzdro`)
	add(string(RoleSide), sure, `side half die seite halfte haelfte cote lado lato kant strona`)
	add(string(RoleDate), sure, `date datum fecha data dato datetime timestamp dateandtime datetimeutc zeitpunkt zeitstempel messdatum datumzeit datumuhrzeit horodatage dateheure fechahora dataora
		measuredat measuredon day tag jour dia giorno pvm paivamaara datummeting`)
	add(string(RoleOperator), sure, `operator operators tester user technician initials measuredby testedby prufer pruefer bediener bearbeiter gemessenvon messtechniker operateur mesurepar
		operador operario operatore tecnico bedienaar`)
	add(string(RoleFixture), sure, `fixture fixtureno jig jigno socket testfixture fassung halter halterung aufnahme vorrichtung messfassung sockel gabarit zocalo utillaje zoccolo houder voet`)
	add(string(RoleDateCode), sure, `datecode dcode dc datumscode datumcode codedate codigofecha codicedata datumkode weekcode yyww herstellwoche`)
	add(string(RoleMarking), sure, `marking mark topmark topmarking print aufdruck beschriftung stempel marquage marcado marca marcatura opdruk oznaczenie`)
	add(string(RoleTube), sure, `tube tubeno tray reel stange magazin rolle barrette bobine tubo stick`)
	add(string(RoleNote), sure, `note notes remark remarks comment comments bemerkung bemerkungen kommentar anmerkung remarque remarques commentaire nota notas observaciones observacion commento
		opmerking opmerkingen uwagi poznamka`)
	add(string(RoleSweep), sure, `sweep sweepno sweepnr run runno curve curveno repeat repetition rep direction dir richtung durchlauf durchgang lauf sens passe pass wiederholung kurve courbe curva`)
	add(string(RoleRL), sure, `rl rload rlast loadresistor loadresistance lastwiderstand rcharge resistancedecharge resistenciadecarga rcarga resistenzadicarico rcarico`)
	return m
}()

// fold makes the spellings of a header alike: case, blanks, punctuation,
// accents, subscripts and ligatures are taken out.
func fold(s string) string {
	var b strings.Builder
	for _, c := range norm.NFKD.String(s) {
		switch {
		case unicode.Is(unicode.Mn, c):
		case c == '\u00df':
			b.WriteString("ss")
		case c == '\u0142' || c == '\u0141':
			b.WriteByte('l')
		case c == '\u00f8' || c == '\u00d8':
			b.WriteByte('o')
		case unicode.IsLetter(c) || unicode.IsDigit(c):
			b.WriteRune(unicode.ToLower(c))
		}
	}
	if b.Len() == 0 && strings.TrimSpace(s) == "#" {
		return "#"
	}
	return b.String()
}

// lookup finds the role of a header name; words like 'measured', 'number' and
// 'set' behind the name are taken off.
func lookup(name string) (word, bool) {
	f := fold(name)
	if w, ok := words[f]; ok {
		return w, true
	}
	for _, tail := range []string{"measured", "meas", "reading", "read", "actual", "gemessen", "messwert", "ist", "mesure", "mesuree", "medida", "medido", "misurata", "misurato", "gemeten", "avg", "mean"} {
		if head, ok := strings.CutSuffix(f, tail); ok {
			if w, ok := words[head]; ok {
				return w, true
			}
		}
	}
	for _, tail := range []string{"name", "number", "nummer", "num", "no", "nr", "id", "code"} {
		if head, ok := strings.CutSuffix(f, tail); ok {
			if w, ok := words[head]; ok && dimOf(w.role) == "" && w.rank < weaker {
				return w, true
			}
		}
	}
	for _, tail := range []string{"set", "soll", "nominal", "target", "programmed", "cmd", "consigne", "sollwert"} {
		if head, ok := strings.CutSuffix(f, tail); ok {
			if w, ok := words[head]; ok && w.rank == sure {
				return word{w.role, weak}, true
			}
		}
	}
	return word{}, false
}
