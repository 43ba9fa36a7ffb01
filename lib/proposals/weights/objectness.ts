/** Logistic weights of regionFeatures, learned by `npm run -s learn:objectness`; see that command for the data. */
export const OBJECTNESS: readonly number[] = [-4.3938,0.5747,0.203,0.3716,2.9307,-0.1883,-0.9707,0.1507,0.9471,2.3022,-0.5741,-1.0825,-0.5092,0.0643,-1.0445,0.281];
