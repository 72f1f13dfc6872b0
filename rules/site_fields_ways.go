package rules

// The keys of a station's ways in beside the network: files that its logger writes, and instruments that speak Modbus. They say how readings
// are fetched, never how they are judged, and are no part of a digest.

var wireChannelForm = &form{`^[a-z0-9_.-]{1,64}$`, "lower-case letters, digits and _ . -, at most 64"}

var filesField = field{key: "files", kind: listKind, least: 1, most: 16, doc: "Delimited text files that are followed as they grow.", item: &field{
	kind: objectKind, doc: "One file, or all that follow a pattern.", fields: []field{
		{key: "path", kind: textKind, required: true, doc: "A file, or a pattern such as /data/logger/*.dat; each file has its own header."},
		{key: "delimiter", kind: textKind, fallback: ",", doc: "One character, or the word tab, space (any number of them), semicolon, pipe."},
		{key: "skip", kind: numberKind, low: 0, high: 100, fallback: "0", doc: "Lines before the header."},
		{key: "header", kind: boolKind, fallback: "true", doc: "Whether the next line names the columns."},
		{key: "after_header", kind: numberKind, low: 0, high: 100, fallback: "0", doc: "Lines between the header and the first record, such as units."},
		{key: "time", kind: listKind, required: true, least: 1, most: 4, doc: "Columns of the time, by name or by number from 1; several are joined by a blank.",
			item: &field{kind: textKind, required: true}},
		{key: "time_format", kind: textKind, fallback: "rfc3339", doc: "rfc3339, unix, or a pattern of YYYY YY MM DD DDD (day of the year) hh mm ss; fractions of seconds follow ss by themselves."},
		{key: "zone", kind: textKind, doc: "UTC, or the offset of the logger's clock such as +01:00. Left out only where the time itself carries one."},
		{key: "decimal", kind: choiceKind, choices: []string{"point", "comma"}, fallback: "point", doc: "What stands before the decimals."},
		{key: "missing", kind: listKind, most: 16, doc: "Marks that stand for no value, beside an empty field and NAN.", item: &field{kind: textKind, required: true}},
		{key: "columns", kind: mapKind, required: true, form: wireChannelForm, most: 512, doc: "Channel: its column, by name or by number from 1.",
			item: &field{kind: textKind, required: true}},
	}}}

var modbusTypes = []string{"uint16", "int16", "uint32", "int32", "float32", "uint64", "int64", "float64"}

var modbusField = field{key: "modbus", kind: listKind, least: 1, most: 32, doc: "Instruments that are asked by Modbus.", item: &field{
	kind: objectKind, doc: "One device and its registers.", fields: []field{
		{key: "url", kind: textKind, required: true, doc: "tcp://host:502, rtu:///dev/ttyUSB0, or rtuovertcp://host:port."},
		{key: "device", kind: numberKind, low: 1, high: 247, fallback: "1", doc: "Address of the device on its bus."},
		{key: "baud", kind: numberKind, low: 300, high: 115200, fallback: "19200", doc: "Speed of the serial line, rtu only."},
		{key: "parity", kind: choiceKind, choices: []string{"none", "even", "odd"}, fallback: "even", doc: "Of the serial line, rtu only."},
		{key: "stop_bits", kind: choiceKind, choices: []string{"1", "2"}, fallback: "1", doc: "Of the serial line, rtu only."},
		{key: "every", kind: spanKind, unit: "s", low: 1, high: 60, fallback: "1s", doc: "Time between polls, whole seconds; each is made on the second."},
		{key: "timeout", kind: spanKind, unit: "s", low: 0.05, high: 10, fallback: "500ms", doc: "How long one answer is waited for."},
		{key: "registers", kind: mapKind, required: true, form: wireChannelForm, most: 128, doc: "Channel: its register.", item: &field{
			kind: objectKind, fields: []field{
				{key: "address", kind: numberKind, required: true, low: 0, high: 65535, doc: "Of the first register, from 0, as on the wire."},
				{key: "table", kind: choiceKind, choices: []string{"holding", "input"}, fallback: "holding", doc: "Function 3 or function 4."},
				{key: "type", kind: choiceKind, choices: modbusTypes, required: true, doc: "Kind of number."},
				{key: "words", kind: choiceKind, choices: []string{"high_first", "low_first"}, fallback: "high_first", doc: "Order of the 16-bit words of a longer number."},
				{key: "scale", kind: numberKind, low: -1e9, high: 1e9, fallback: "1", doc: "The value is the number times this, plus offset."},
				{key: "offset", kind: numberKind, low: -1e9, high: 1e9, fallback: "0", doc: "Added after scale."},
				{key: "unit", kind: textKind, doc: "Unit of the value after scale and offset; held against what reads the channel."},
				{key: "missing", kind: numberKind, low: -1e300, high: 1e300, doc: "The raw number that stands for no value."},
			}}},
	}}}
