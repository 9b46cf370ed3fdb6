// Which panel stands where. A new analysis is one file beside this one and one line here.
//
//   name    of the file that has its mount(); the analysis' name with underscores
//   stages  where the page is: archive (nothing chosen), run, view, index
//   place   rail (beside, on a wide screen) or main; on a narrow screen all stand in main, in this order
//   width   of twelve columns on a wide screen; 0: the panel lays its figures into the columns itself

export const panels = Object.freeze([
  { name: 'archive', stages: ['archive'], place: 'main', width: 12 },
  { name: 'worst_views', stages: ['archive'], place: 'main', width: 12 },
  { name: 'index_state', stages: ['index'], place: 'main', width: 12 },
  { name: 'subject', stages: ['run', 'view'], place: 'main', width: 12 },
  { name: 'findings', stages: ['view'], place: 'main', width: 12 },
  { name: 'field_of_regard', stages: ['view'], place: 'rail', width: 12 },
  { name: 'preparation', stages: ['run', 'view'], place: 'rail', width: 12 },
  { name: 'field_of_regard', stages: ['run'], place: 'main', width: 12 },
  { name: 'series', stages: ['view'], place: 'main', width: 12 },
  { name: 'frames', stages: ['view'], place: 'main', width: 4 },
  { name: 'statistics', stages: ['view'], place: 'main', width: 0 },
]);
