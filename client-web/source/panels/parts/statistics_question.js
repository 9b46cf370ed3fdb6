// The question that both findings and statistics ask; asked at the same time it is one request.

import { address } from '../../api.js';
import { preparation } from '../../view_state.js';

export const statisticsPath = (api, state, view) => address(api.viewPath(view.id, 'statistics'), preparation(state));
