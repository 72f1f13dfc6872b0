// Package radiation derives the radiation budget at the surface, and what is told of the sky by it, from the judged values of one minute.
// A derived value has the least of its parents' verdicts and is absent where it means nothing. All of it is a pure function of one minute;
// hours, days and months are means of minutes.
package radiation
